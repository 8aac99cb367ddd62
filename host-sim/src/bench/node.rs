//! What sits in which area, as said on the command line.
//!
//! Contract: `AREA=KIND`, the last word on an area holds; an area that nobody
//! names sits in-process as soon as one is named.

use crate::case::model::Grid;
use std::fmt;
use std::str::FromStr;
use thiserror::Error;

/// A processor core that can be emulated.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Core {
    /// Cortex-M3: no hardware float.
    M3,
    /// Cortex-M4 with float.
    M4,
    /// Cortex-M7 with float.
    M7,
    /// Cortex-M33 with float.
    M33,
}

impl Core {
    /// All of them.
    pub const ALL: [Core; 4] = [Core::M3, Core::M4, Core::M7, Core::M33];

    /// Its word, as on the command line.
    pub const fn word(self) -> &'static str {
        match self {
            Core::M3 => "m3",
            Core::M4 => "m4",
            Core::M7 => "m7",
            Core::M33 => "m33",
        }
    }

    /// Its full name.
    pub const fn name(self) -> &'static str {
        match self {
            Core::M3 => "Cortex-M3",
            Core::M4 => "Cortex-M4F",
            Core::M7 => "Cortex-M7F",
            Core::M33 => "Cortex-M33F",
        }
    }

    /// The emulator's machine that has it.
    pub const fn machine(self) -> &'static str {
        match self {
            Core::M3 => "mps2-an385",
            Core::M4 => "mps2-an386",
            Core::M7 => "mps2-an500",
            Core::M33 => "mps2-an505",
        }
    }

    /// The compiler's target for it.
    pub const fn target(self) -> &'static str {
        match self {
            Core::M3 => "thumbv7m-none-eabi",
            Core::M4 | Core::M7 => "thumbv7em-none-eabihf",
            Core::M33 => "thumbv8m.main-none-eabihf",
        }
    }
}

impl FromStr for Core {
    type Err = String;

    fn from_str(word: &str) -> Result<Self, String> {
        Core::ALL.into_iter().find(|core| core.word() == word).ok_or_else(|| {
            let known = Core::ALL.map(Core::word).join(", ");
            format!("no core is called `{word}`; there are {known}")
        })
    }
}

impl fmt::Display for Core {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.word())
    }
}

/// How bytes get to an emulated board.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, clap::ValueEnum)]
pub enum LinkKind {
    /// Two named pipes that the board opens through the emulator: fast, exact clock.
    #[default]
    Fifo,
    /// The board's own serial port, interrupt-driven.
    Uart,
}

impl LinkKind {
    /// Its word, as on the command line.
    pub const fn word(self) -> &'static str {
        match self {
            LinkKind::Fifo => "fifo",
            LinkKind::Uart => "uart",
        }
    }
}

/// What runs an area's steward.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum NodeKind {
    /// This process.
    InProcess,
    /// An emulated board with this core.
    Emulated(Core),
}

impl FromStr for NodeKind {
    type Err = String;

    fn from_str(word: &str) -> Result<Self, String> {
        match word.split_once(':') {
            None if word == "in-process" => Ok(NodeKind::InProcess),
            Some(("emulated", core)) => core.parse().map(NodeKind::Emulated),
            _ => Err(format!(
                "`{word}` is no node; there are in-process and emulated:CORE with CORE one of {}",
                Core::ALL.map(Core::word).join(", ")
            )),
        }
    }
}

impl fmt::Display for NodeKind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            NodeKind::InProcess => f.write_str("in-process"),
            NodeKind::Emulated(core) => write!(f, "emulated:{core}"),
        }
    }
}

/// An assignment on the command line: `AREA=KIND`, or `all=KIND`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Assignment {
    /// Name of the area, or `all`.
    pub area: String,
    /// What sits there.
    pub kind: NodeKind,
}

impl FromStr for Assignment {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        match text.split_once('=') {
            Some((area, kind)) => Ok(Self { area: area.to_owned(), kind: kind.parse()? }),
            None if text == "in-process" => {
                Ok(Self { area: "all".to_owned(), kind: NodeKind::InProcess })
            }
            None => Err(format!("`{text}` assigns nothing; write AREA=KIND, say all=emulated:m4")),
        }
    }
}

/// An assignment names an area that the grid has not.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
#[error("no area is called `{given}`; there are {known}, and `all`")]
pub struct UnknownArea {
    given: String,
    known: String,
}

/// What sits in each area of a grid; emulated Cortex-M4F boards where nothing is said at all.
///
/// Errors: an area that is not there.
pub fn assign(grid: &Grid, given: &[Assignment]) -> Result<Vec<NodeKind>, UnknownArea> {
    let rest = match given {
        [] => NodeKind::Emulated(Core::M4),
        _ => NodeKind::InProcess,
    };
    let mut kinds = vec![rest; grid.areas.len()];
    for Assignment { area, kind } in given {
        if area.eq_ignore_ascii_case("all") {
            kinds.fill(*kind);
            continue;
        }
        let at = grid.areas.iter().position(|a| a.name.eq_ignore_ascii_case(area));
        match at.and_then(|at| kinds.get_mut(at)) {
            Some(slot) => *slot = *kind,
            None => {
                let known: Vec<&str> = grid.areas.iter().map(|a| a.name.as_str()).collect();
                return Err(UnknownArea { given: area.clone(), known: known.join(", ") });
            }
        }
    }
    Ok(kinds)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::builtin_grid;

    fn assigned(given: &[&str]) -> Vec<NodeKind> {
        let given: Vec<Assignment> = given.iter().map(|text| text.parse().unwrap()).collect();
        assign(&builtin_grid(), &given).unwrap()
    }

    #[test]
    fn seats_every_area_on_an_m4_when_nothing_is_said() {
        assert_eq!(assigned(&[]), [NodeKind::Emulated(Core::M4); 3]);
    }

    #[test]
    fn the_last_word_on_an_area_holds_and_the_rest_sit_in_process() {
        assert_eq!(
            assigned(&["ashmere=emulated:m33"]),
            [NodeKind::Emulated(Core::M33), NodeKind::InProcess, NodeKind::InProcess]
        );
        assert_eq!(
            assigned(&["all=emulated:m7", "Brackwater=in-process"])[1..],
            [NodeKind::InProcess, NodeKind::Emulated(Core::M7)]
        );
    }

    #[test]
    fn an_area_that_is_not_there_is_answered_with_those_that_are() {
        let given = ["atlantis=in-process".parse().unwrap()];
        let said = assign(&builtin_grid(), &given).unwrap_err().to_string();
        assert!(said.contains("`atlantis`") && said.contains("Cinderholm"), "{said}");
    }

    #[test]
    fn a_core_that_is_not_there_is_answered_with_those_that_are() {
        let said = "all=emulated:m5".parse::<Assignment>().unwrap_err();
        assert!(said.contains("`m5`") && said.contains("m33"), "{said}");
        assert!("all=serial".parse::<Assignment>().unwrap_err().contains("in-process"));
        assert!("all".parse::<Assignment>().unwrap_err().contains("AREA=KIND"));
    }
}
