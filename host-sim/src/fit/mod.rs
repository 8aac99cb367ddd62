//! Does it fit: what each area's steward takes of each chip, measured now.
//!
//! Contract: every figure comes from an image that is built and run in this
//! call, or is marked as not measured with the reason. Instructions are
//! executed instructions, not cycles; what turns them into time is stated.
//!
//! Data flow: image -> [`elf`] sizes; image on emulated boards through [`play`]
//! -> effort and traffic per tick -> spreads; sizes and stack -> [`growth`] ->
//! the largest area; `show` and `page` write it down.

pub mod elf;
pub mod growth;
pub mod page;
pub mod play;
pub mod show;

use crate::bench::image::{ImageError, Images};
use crate::bench::node::{Core, LinkKind, NodeKind};
use crate::bench::notes::{BoardNotes, Effort};
use crate::bench::process::StartError;
use crate::bench::{BenchError, Benched, Setup, bench};
use crate::case::model::Grid;
use crate::rehearsal::RehearsalError;
use elf::Sizes;
use growth::{Capacity, Largest, Taken};
use serde::Serialize;
use thiserror::Error;

/// Version of the JSON document.
pub const SCHEMA: u32 = 1;
/// Ticks at the start that are not counted: the first rebuild, and estimates that begin.
const WARM_UP_TICKS: u32 = 2;

/// What is assumed and asked.
#[derive(Clone, Debug)]
pub struct Options {
    /// Cores to measure.
    pub cores: Vec<Core>,
    /// Clock of every core, in place of its usual one, MHz.
    pub mhz: Option<f64>,
    /// Cycles that an instruction is taken to need.
    pub cycles_per_instruction: f64,
    /// Speed of the serial link, bit/s; a byte takes ten.
    pub baud: f64,
    /// Flash of the chip asked for, KiB.
    pub flash_kib: f64,
    /// RAM of the chip asked for, KiB.
    pub ram_kib: f64,
    /// Images given by hand.
    pub images: Images,
}

/// A clock that chips with this core usually have, MHz.
pub const fn usual_mhz(core: Core) -> f64 {
    match core {
        Core::M3 => 72.0,
        Core::M4 => 168.0,
        Core::M7 => 400.0,
        Core::M33 => 160.0,
    }
}

/// Seconds of the short play on a core; soft float is slow, and emulated.
const fn play_s(core: Core) -> f64 {
    match core {
        Core::M3 => 3.0,
        Core::M4 | Core::M7 | Core::M33 => 8.0,
    }
}

/// Least, middle and most of some ticks.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
pub struct Spread {
    /// Number of ticks.
    pub ticks: usize,
    /// Least.
    pub min: u64,
    /// Middle.
    pub median: u64,
    /// Most.
    pub max: u64,
}

impl Spread {
    /// Spread of values; none of no values.
    pub fn of(values: impl Iterator<Item = u64>) -> Option<Self> {
        let mut sorted: Vec<u64> = values.collect();
        sorted.sort_unstable();
        let (&min, &max) = (sorted.first()?, sorted.last()?);
        let median = sorted.get(sorted.len() / 2).copied()?;
        Some(Self { ticks: sorted.len(), min, median, max })
    }
}

/// One area on one core.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct AreaFit {
    /// Name.
    pub area: String,
    /// What it needs room for.
    pub needs: Capacity,
    /// Instructions of ticks without a rebuild and without a proof.
    pub instructions: Option<Spread>,
    /// Instructions of ticks with one.
    pub rebuild_instructions: Option<Spread>,
    /// Share of a tick that the longest one takes, at the clock stated.
    pub tick_share: Option<f64>,
    /// Deepest stack seen, bytes.
    pub stack_bytes: Option<u64>,
    /// What is left of the room for the stack, bytes.
    pub stack_left_bytes: Option<u64>,
    /// Bytes to the board per tick, as on the wire.
    pub heard_bytes: Option<Spread>,
    /// Bytes from the board per tick.
    pub said_bytes: Option<Spread>,
    /// Share of the link that the busier direction takes in the busiest tick.
    pub link_share: Option<f64>,
}

/// One core.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CoreFit {
    /// Its word.
    pub core: String,
    /// Its name.
    pub name: String,
    /// Clock assumed, MHz.
    pub mhz: f64,
    /// Sizes of the image.
    pub image: Option<Sizes>,
    /// What the image can hold.
    pub holds: Option<Capacity>,
    /// The grid's areas.
    pub areas: Vec<AreaFit>,
    /// The largest area of usual shape that the chip asked for holds.
    pub largest: Option<Largest>,
    /// Why something is not measured.
    pub not_measured: Option<String>,
}

/// The whole table.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Fit {
    /// Version of the document.
    pub schema: u32,
    /// Name of the grid.
    pub grid: String,
    /// Tick, s.
    pub tick_s: f64,
    /// Cycles that an instruction is taken to need.
    pub cycles_per_instruction: f64,
    /// Speed of the serial link, bit/s.
    pub baud: f64,
    /// Flash of the chip asked for, KiB.
    pub flash_kib: f64,
    /// RAM of the chip asked for, KiB.
    pub ram_kib: f64,
    /// The cores.
    pub cores: Vec<CoreFit>,
}

/// Why nothing could be measured at all.
#[derive(Debug, Error)]
pub enum FitError {
    /// A tool or image is missing.
    #[error("{0}")]
    Environment(String),
    /// The grid can not be run.
    #[error("{0}")]
    Input(String),
}

/// Measure a grid's areas on some cores.
///
/// `watch` is told the share done; when it returns false what is finished is returned.
/// Errors: [`FitError`] when the emulator or an image is missing, or the grid can not be run.
pub fn fit(
    grid: &Grid,
    options: &Options,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<Fit, FitError> {
    let mut cores = Vec::new();
    let total: f64 = options.cores.len() as f64;
    for (index, &core) in options.cores.iter().enumerate() {
        let mut going = true;
        let mut part = |share: f64| {
            going = watch((index as f64 + share) / total);
            going
        };
        cores.push(on_core(grid, core, options, &mut part)?);
        if !going {
            break;
        }
    }
    Ok(Fit {
        schema: SCHEMA,
        grid: grid.name.clone(),
        tick_s: play::TICK_S,
        cycles_per_instruction: options.cycles_per_instruction,
        baud: options.baud,
        flash_kib: options.flash_kib,
        ram_kib: options.ram_kib,
        cores,
    })
}

fn on_core(
    grid: &Grid,
    core: Core,
    options: &Options,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<CoreFit, FitError> {
    let mut images = options.images.clone();
    images.measuring = true;
    let mut found = CoreFit {
        core: core.word().to_owned(),
        name: core.name().to_owned(),
        mhz: options.mhz.unwrap_or(usual_mhz(core)),
        image: None,
        holds: None,
        areas: Vec::new(),
        largest: None,
        not_measured: None,
    };
    match images.find(core, LinkKind::Fifo) {
        Ok(path) => match elf::sizes(&path) {
            Ok(sizes) => found.image = Some(sizes),
            Err(why) => found.not_measured = Some(why.to_string()),
        },
        Err(why @ (ImageError::MissingTool { .. } | ImageError::NoTree)) => {
            return Err(FitError::Environment(why.to_string()));
        }
        Err(why) => {
            found.not_measured = Some(why.to_string());
            return Ok(found);
        }
    }
    let setup = Setup { images, ..Setup::of(vec![NodeKind::Emulated(core); grid.areas.len()]) };
    let run = bench(grid, &play::short(grid, play_s(core)), &setup, None, watch);
    match run {
        Ok(done) => measured(grid, options, &done, &mut found),
        Err(RehearsalError::Seat { area, why }) => match why.downcast_ref::<BenchError>() {
            Some(BenchError::Start(missing @ StartError::NoEmulator(_))) => {
                return Err(FitError::Environment(missing.to_string()));
            }
            _ => found.not_measured = Some(format!("{area}: {why}")),
        },
        Err(why) => return Err(FitError::Input(why.to_string())),
    }
    Ok(found)
}

fn measured(grid: &Grid, options: &Options, done: &Benched, found: &mut CoreFit) {
    for board in &done.boards {
        let greeting = &board.greeting;
        found.holds = Some(Capacity {
            buses: greeting.buses_max,
            unknowns: greeting.unknowns_max,
            rows: greeting.rows_max,
        });
        let room = found.image.map_or(0, |image| image.stack_room_bytes);
        found.areas.push(area_fit(grid, options, board, found.mhz, room));
    }
    if let Some(lost) = done.attended.lost.first() {
        let name = &grid.areas[lost.area].name;
        found.not_measured =
            Some(format!("the board of {name} was lost at tick {}: {}", lost.tick, lost.why));
    }
    let stack = found.areas.iter().filter_map(|area| area.stack_bytes).max();
    if let (Some(image), Some(capacity), Some(stack)) = (found.image, found.holds, stack) {
        let taken = Taken {
            capacity,
            flash_bytes: image.flash_bytes() as f64,
            static_ram_bytes: image.static_ram_bytes() as f64,
            stack_bytes: stack as f64,
        };
        let [flash, ram] = [options.flash_kib, options.ram_kib].map(|kib| kib * 1024.0);
        found.largest = Some(growth::largest(&taken, flash, ram));
    }
}

fn area_fit(
    grid: &Grid,
    options: &Options,
    board: &BoardNotes,
    mhz: f64,
    stack_room_bytes: u64,
) -> AreaFit {
    let counted = || board.efforts.iter().filter(|effort| effort.tick >= WARM_UP_TICKS);
    let spread = |plain: bool| {
        let of = counted().filter(|effort| effort.is_plain() == plain);
        Spread::of(of.map(|effort: &Effort| u64::from(effort.instructions)))
    };
    let most = counted().map(|effort| effort.instructions).max();
    let stack_bytes = board.efforts.iter().map(|effort| u64::from(effort.stack_bytes)).max();
    let heard_bytes = Spread::of(board.traffic.iter().map(|t| t.heard_bytes as u64));
    let said_bytes = Spread::of(board.traffic.iter().map(|t| t.said_bytes as u64));
    let busiest = heard_bytes.iter().chain(&said_bytes).map(|spread| spread.max).max();
    // A byte takes ten bits on a serial line: start, eight, stop.
    let link_bytes = options.baud / 10.0 * play::TICK_S;
    AreaFit {
        area: grid.areas[board.area].name.clone(),
        needs: needs(grid, board.area),
        instructions: spread(true),
        rebuild_instructions: spread(false),
        tick_share: most.map(|most| {
            f64::from(most) * options.cycles_per_instruction / (mhz * 1e6 * play::TICK_S)
        }),
        stack_bytes,
        stack_left_bytes: stack_bytes
            .filter(|_| stack_room_bytes > 0)
            .map(|stack| stack_room_bytes.saturating_sub(stack)),
        heard_bytes,
        said_bytes,
        link_share: busiest.map(|bytes| bytes as f64 / link_bytes),
    }
}

/// What an area needs room for.
fn needs(grid: &Grid, area: usize) -> Capacity {
    let own = |bus: usize| grid.buses[bus].area == area;
    let ends = |line: &crate::case::model::Line| (own(line.from), own(line.to));
    let ties = grid.lines.iter().filter(|line| ends(line).0 != ends(line).1).count();
    let inner = grid.lines.iter().filter(|line| ends(line) == (true, true)).count();
    let actuators = grid.units.iter().filter(|unit| own(unit.bus)).count()
        + grid.feeders.iter().filter(|feeder| own(feeder.bus)).count();
    Capacity {
        buses: grid.buses.iter().filter(|bus| bus.area == area).count(),
        unknowns: actuators + 2 * ties,
        rows: inner + ties.max(1),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::builtin_grid;

    #[test]
    fn a_spread_is_least_middle_and_most() {
        let spread = Spread::of([5, 1, 9].into_iter()).unwrap();
        assert_eq!(spread, Spread { ticks: 3, min: 1, median: 5, max: 9 });
        assert_eq!(Spread::of(std::iter::empty()), None);
    }

    #[test]
    fn counts_what_the_first_area_needs() {
        let grid = builtin_grid();
        let needs = needs(&grid, 0);
        assert_eq!(needs.buses, 12);
        assert!(needs.unknowns > 4 && needs.rows > 12, "{needs:?}");
    }
}
