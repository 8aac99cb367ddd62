//! Finds or builds the image that a board runs.
//!
//! Contract: `firmware/boards/build CORE --link LINK` of the source tree that
//! the program stands in builds it and prints its path last; nothing is
//! remembered from one call to the next but what cargo keeps.

use super::node::{Core, LinkKind};
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use thiserror::Error;

/// The build script, from the root of the source tree.
const SCRIPT: &str = "firmware/boards/build";
/// Exit status by which the script says that a tool is missing.
const MISSING_TOOL: i32 = 3;

/// Why there is no image.
#[derive(Debug, Error)]
pub enum ImageError {
    /// No source tree is near.
    #[error(
        "no {SCRIPT} above the working directory or the program: emulated boards are built from the source tree; run from there, or give images with --image CORE=FILE"
    )]
    NoTree,
    /// The script can not be run.
    #[error("cannot run {SCRIPT}: {0}")]
    Script(std::io::Error),
    /// A tool is missing.
    #[error("{said}\n{}", how_to_install(*core))]
    MissingTool {
        /// Core to build for.
        core: Core,
        /// What the script said.
        said: String,
    },
    /// It does not build.
    #[error("the image for {core} does not build:\n{said}")]
    Build {
        /// Core to build for.
        core: Core,
        /// What the script said.
        said: String,
    },
    /// A file that was named is not there.
    #[error("no image at {}", .0.display())]
    NoFile(PathBuf),
}

/// The two commands that install what an emulated board needs.
pub fn how_to_install(core: Core) -> String {
    format!(
        "emulated boards need the emulator and the compiler's target; install them with\n  apt-get install -y --no-install-recommends qemu-system-arm\n  rustup target add {}",
        core.target()
    )
}

/// Images given by hand, then those that were built in this call.
#[derive(Clone, Debug, Default)]
pub struct Images {
    known: Vec<(Core, PathBuf)>,
    /// Whether images are to count their own effort.
    pub measuring: bool,
}

impl Images {
    /// With some images given by hand.
    pub fn given(known: Vec<(Core, PathBuf)>) -> Self {
        Self { known, measuring: false }
    }

    /// The image for a core, built if need be.
    ///
    /// Errors: [`ImageError`].
    pub fn find(&mut self, core: Core, link: LinkKind) -> Result<PathBuf, ImageError> {
        let known = self.known.iter().find(|(of, _)| *of == core).map(|(_, path)| path.clone());
        let path = match known {
            Some(path) => path,
            None => {
                let path = build(core, link, self.measuring)?;
                self.known.push((core, path.clone()));
                path
            }
        };
        if path.is_file() { Ok(path) } else { Err(ImageError::NoFile(path)) }
    }
}

fn build(core: Core, link: LinkKind, measuring: bool) -> Result<PathBuf, ImageError> {
    let script = tree().ok_or(ImageError::NoTree)?.join(SCRIPT);
    let mut command = Command::new(&script);
    command.args([core.word(), "--link", link.word()]);
    if measuring {
        command.arg("--measure");
    }
    let done = command.stdin(Stdio::null()).output().map_err(ImageError::Script)?;
    let said = String::from_utf8_lossy(&done.stderr).trim_end().to_owned();
    if done.status.code() == Some(MISSING_TOOL) {
        return Err(ImageError::MissingTool { core, said });
    }
    let out = String::from_utf8_lossy(&done.stdout).into_owned();
    match out.lines().last() {
        Some(path) if done.status.success() => Ok(PathBuf::from(path.trim())),
        _ => Err(ImageError::Build { core, said }),
    }
}

/// Root of the source tree: above the working directory, else above the program.
fn tree() -> Option<PathBuf> {
    let program = std::env::current_exe().ok();
    let starts = [std::env::current_dir().ok(), program];
    let holds = |dir: &&Path| dir.join(SCRIPT).is_file();
    starts.into_iter().flatten().find_map(|start| start.ancestors().find(holds).map(Path::to_owned))
}
