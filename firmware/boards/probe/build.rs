//! Puts the linker script on the link path.

use std::{env, fs, path::PathBuf};

fn main() {
    let out = PathBuf::from(env::var("OUT_DIR").expect("cargo sets OUT_DIR"));
    fs::copy("../mps2/memory/m4.x", out.join("memory.x")).expect("the linker script is there");
    println!("cargo:rustc-link-search={}", out.display());
    println!("cargo:rerun-if-changed=../mps2/memory/m4.x");
}
