//! Puts the linker scripts of the machine on the link path.

use std::{env, fs, path::PathBuf};

fn main() {
    let out = PathBuf::from(env::var("OUT_DIR").expect("cargo sets OUT_DIR"));
    let target = env::var("TARGET").expect("cargo sets TARGET");
    let core = env::var("HEDGEROW_CORE").unwrap_or_else(|_| default_core(&target).to_owned());
    let memory = match core.as_str() {
        "cortex-m3" => "memory/m3.x",
        "cortex-m33f" => "memory/m33.x",
        _ => "memory/m4.x",
    };
    fs::copy(memory, out.join("memory.x")).expect("the linker script is there");
    fs::write(out.join("device.x"), "").expect("OUT_DIR can be written");
    println!("cargo:rustc-link-search={}", out.display());
    println!("cargo:rustc-env=HEDGEROW_CORE={core}");
    println!("cargo:rustc-check-cfg=cfg(hedgerow_an505)");
    if core == "cortex-m33f" {
        println!("cargo:rustc-cfg=hedgerow_an505");
    }
    println!("cargo:rerun-if-env-changed=HEDGEROW_CORE");
    println!("cargo:rerun-if-env-changed=HEDGEROW_CHARTER");
    println!("cargo:rerun-if-changed=memory");
}

fn default_core(target: &str) -> &'static str {
    match target {
        "thumbv7m-none-eabi" => "cortex-m3",
        "thumbv8m.main-none-eabihf" => "cortex-m33f",
        _ => "cortex-m4f",
    }
}
