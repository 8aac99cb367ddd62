//! A grid made up from a seed: plausible in shape, loading and plant, no place on earth.
//!
//! Contract: the text passes every check of grid files; the same three numbers give
//! the same text. Buses have on average 2.6 to 2.9 lines; every area hangs together
//! by itself; neighbouring areas are joined by two to four ties; no line is loaded
//! above 80 % in the base case.
//!
//! Data flow: seed -> `lay_out` (places, lines by distance) -> `equip` (loads, units)
//! -> base flow -> stronger lines and ratings -> `write`.
//! Source: mean degree and local growth of transmission grids after Wang, Scaglione
//! and Thomas, IEEE Trans. Smart Grid 1(1), 2010, from memory; the figures are ours.

mod equip;
mod lay_out;
mod write;

use rand::{Rng, SeedableRng, rngs::ChaCha8Rng};
use thiserror::Error;

use super::model::{Bus, Grid};
use crate::grid::dc::{DcError, DcNetwork};

/// Buses of an area at least: fewer make no network.
pub const AREA_BUSES_MIN: usize = 4;
/// Buses at most.
pub const BUSES_MAX: usize = 10_000;
/// Areas at most.
pub const AREAS_MAX: usize = 100;

/// Why no grid was made.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum SyntheticError {
    /// Numbers that make no grid.
    #[error(
        "cannot make {areas} areas of {buses} buses: from {AREA_BUSES_MIN} buses per area up to {BUSES_MAX} in all, 1 to {AREAS_MAX} areas"
    )]
    Size {
        /// Buses asked for.
        buses: usize,
        /// Areas asked for.
        areas: usize,
    },
    /// The base flow has no solution.
    #[error(transparent)]
    Flow(#[from] DcError),
}

/// Make a grid and write it as a grid file.
///
/// Errors: sizes out of range.
/// Cost: one sparse factorisation.
pub fn synthetic(buses: usize, areas: usize, seed: u64) -> Result<String, SyntheticError> {
    let sound = (1..=AREAS_MAX).contains(&areas) && buses <= BUSES_MAX;
    if !sound || buses < areas * AREA_BUSES_MIN {
        return Err(SyntheticError::Size { buses, areas });
    }
    let mut draw = Draw::new(seed, "places");
    let mut grid = lay_out::lay_out(buses, areas, &mut draw);
    grid.name = format!("Synthetic {buses}-{areas}-{seed}");
    equip::equip(&mut grid, &mut Draw::new(seed, "plant"));
    strengthen(&mut grid)?;
    rate(&mut grid, &mut Draw::new(seed, "ratings"))?;
    Ok(write::write(&grid, buses, areas, seed))
}

/// A stream of numbers with a name of its own, so that one stage leaves the others alone.
pub(super) struct Draw(ChaCha8Rng);

impl Draw {
    fn new(seed: u64, name: &str) -> Self {
        // FNV-1a folds the name into the seed.
        let fold = |hash: u64, byte: u8| (hash ^ u64::from(byte)).wrapping_mul(0x0100_0000_01b3);
        let hash = name.bytes().fold(0xcbf2_9ce4_8422_2325 ^ seed.rotate_left(17), fold);
        Self(ChaCha8Rng::seed_from_u64(hash))
    }

    /// A number from 0 up to 1.
    fn share(&mut self) -> f64 {
        f64::from(self.0.next_u32() >> 8) / f64::from(1 << 24)
    }

    /// A number within bounds.
    fn within(&mut self, least: f64, most: f64) -> f64 {
        least + (most - least) * self.share()
    }

    /// A whole number below a bound.
    fn below(&mut self, bound: usize) -> usize {
        ((self.share() * bound as f64) as usize).min(bound.saturating_sub(1))
    }
}

/// Rounded to a number of decimals, so that the file says exactly what was used.
pub(super) fn rounded(value: f64, decimals: i32) -> f64 {
    let scale = 10_f64.powi(decimals);
    (value * scale).round() / scale
}

/// Rounds in which corridors with much flow are built stronger.
const STRENGTHENINGS: usize = 3;
/// Flow that one circuit at 230 kV carries without a second one beside it, in MW, about.
const CIRCUIT_MW: f64 = 120.0;

/// Build lines with much flow stronger (more circuits, or a higher voltage), as grids have grown.
fn strengthen(grid: &mut Grid) -> Result<(), DcError> {
    let plain_pu: Vec<f64> = grid.lines.iter().map(|line| line.reactance_pu).collect();
    for _ in 0..STRENGTHENINGS {
        let flow_mw = flows_mw(grid)?;
        for ((line, plain_pu), flow) in grid.lines.iter_mut().zip(&plain_pu).zip(flow_mw) {
            let circuits = (1.0 + flow.abs() / CIRCUIT_MW).powf(1.2);
            line.reactance_pu = rounded((plain_pu / circuits).max(0.0005), 5);
        }
    }
    Ok(())
}

fn flows_mw(grid: &Grid) -> Result<Vec<f64>, DcError> {
    let injection_mw = crate::divide::base::injections_mw(grid);
    Ok(DcNetwork::new(grid, &vec![true; grid.lines.len()])?.flows_mw(&injection_mw)?.flow_mw)
}

/// Ratings by the base flow: busy lines at 35 to 78 %, quiet ones on a size of their own.
fn rate(grid: &mut Grid, draw: &mut Draw) -> Result<(), DcError> {
    let flow_mw = flows_mw(grid)?;
    let mean_mw = flow_mw.iter().map(|flow| flow.abs()).sum::<f64>() / flow_mw.len().max(1) as f64;
    for (line, base_mw) in flow_mw.iter().enumerate() {
        let tie =
            area(&grid.buses, grid.lines[line].from) != area(&grid.buses, grid.lines[line].to);
        // Ties are built for help, so they have more to spare.
        let floor_mw = mean_mw * if tie { draw.within(2.0, 4.0) } else { draw.within(0.6, 1.6) };
        let wanted_mw = (base_mw.abs() / draw.within(0.35, 0.78)).max(floor_mw);
        grid.lines[line].rating_mw = (wanted_mw / 5.0).ceil() * 5.0;
    }
    Ok(())
}

fn area(buses: &[Bus], bus: usize) -> usize {
    buses[bus].area
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::parse_grid;
    use crate::divide::base::{BaseCase, is_tie};

    fn made(buses: usize, areas: usize, seed: u64) -> Grid {
        let text = synthetic(buses, areas, seed).expect("sizes in range");
        parse_grid(&text, "made.grid.toml").unwrap_or_else(|problems| panic!("{problems}"))
    }

    #[test]
    fn made_grids_pass_every_check_over_sizes_and_seeds() {
        for (buses, areas) in [(4, 1), (12, 3), (30, 2), (64, 5), (300, 8)] {
            for seed in 0..6 {
                let grid = made(buses, areas, seed);
                assert_eq!((grid.buses.len(), grid.areas.len()), (buses, areas));
            }
        }
    }

    #[test]
    fn shape_and_loading_are_within_the_stated_figures() {
        for seed in 0..5 {
            let grid = made(400, 6, seed);
            let degree = 2.0 * grid.lines.len() as f64 / 400.0;
            assert!((2.6..=2.9).contains(&degree), "mean degree {degree}");
            let base = BaseCase::of_file(&grid).expect("a flow");
            let (worst, _) = base.worst(&grid);
            assert!((0.5..=0.8).contains(&worst), "worst loading {worst}");
            let ties = (0..grid.lines.len()).filter(|&line| is_tie(&grid, line)).count();
            assert!((10..=60).contains(&ties), "{ties} ties");
            let x: Vec<f64> = grid.lines.iter().map(|line| line.reactance_pu).collect();
            assert!(x.iter().all(|x| (0.0005..=0.4).contains(x)), "reactances");
            let angle = |pick: fn(f64, f64) -> f64| base.angle_rad.iter().copied().fold(0.0, pick);
            let spread_deg = (angle(f64::max) - angle(f64::min)).to_degrees();
            assert!((5.0..=120.0).contains(&spread_deg), "angles {spread_deg} degrees apart");
            assert!(!grid.feeders.is_empty() && grid.units.len() > 20);
        }
    }

    #[test]
    fn the_same_numbers_give_the_same_text_and_another_seed_another() {
        assert_eq!(synthetic(60, 3, 7), synthetic(60, 3, 7));
        assert_ne!(synthetic(60, 3, 7), synthetic(60, 3, 8));
    }

    #[test]
    fn refuses_areas_of_fewer_buses_than_a_network_needs() {
        assert_eq!(synthetic(10, 3, 1), Err(SyntheticError::Size { buses: 10, areas: 3 }));
        assert!(synthetic(BUSES_MAX + 1, 3, 1).is_err() && synthetic(10, 0, 1).is_err());
    }

    #[test]
    fn the_largest_size_passes_its_check() {
        assert_eq!(made(BUSES_MAX, 20, 3).buses.len(), BUSES_MAX);
    }
}
