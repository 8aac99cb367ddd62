//! Prints how many times faster than real time the loop runs, on one core.
//!
//! Figures only, nothing is asserted: wall-clock belongs to the machine.
//! `cargo bench -p hedgerow --bench speed`

use hedgerow::case::model::{Grid, Play};
use hedgerow::case::{builtin_play, builtin_plays, parse_grid, parse_play};
use hedgerow::record::Scheme;
use hedgerow::rehearsal::rehearse;
use std::time::Instant;

const GRID_39: &str = include_str!("../../tests/data/39bus_closed_loop.grid.toml");
const PLAY_39: &str = include_str!("../../tests/data/39bus_closed_loop_load.play.toml");

fn factor(grid: &Grid, play: &Play) -> Option<f64> {
    let best = (0..5).filter_map(|_| {
        let start = Instant::now();
        let run = rehearse(grid, play, Scheme::Steward, &mut |_| true).ok()?;
        Some(run.duration_s / start.elapsed().as_secs_f64())
    });
    best.max_by(f64::total_cmp)
}

fn main() {
    println!("{:<20} {:>10} {:>16}", "play", "length, s", "x real time");
    for (name, _) in builtin_plays() {
        if let Some((grid, play)) = builtin_play(name)
            && let Some(factor) = factor(&grid, &play)
        {
            println!("{name:<20} {:>10.0} {factor:>16.0}", play.run.duration_s);
        }
    }
    let grid = parse_grid(GRID_39, "39bus_closed_loop.grid.toml");
    let Ok(grid) = grid else { return };
    let Ok(mut play) = parse_play(PLAY_39, "39bus_closed_loop_load.play.toml", &grid) else {
        return;
    };
    play.run.duration_s = 120.0;
    if let Some(factor) = factor(&grid, &play) {
        println!("{:<20} {:>10.0} {factor:>16.0}", "39 buses, 3 areas", 120.0);
    }
}
