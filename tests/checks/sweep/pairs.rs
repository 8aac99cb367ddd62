//! What screening leaves out must do nothing when it is run after all.

use hedgerow::case::builtin_grid;
use hedgerow::case::model::Grid;
use hedgerow::divide::divide;
use hedgerow::sweep::outage::{self, Outage};
use hedgerow::sweep::prepare::divided;
use hedgerow::sweep::screen::pairs;
use hedgerow::sweep::{Balancing, row::Row};
use hedgerow_tests::table::data_grid;

use super::identities::{cascade, cases};

/// Every pair of the built-in grid and a seeded part of 39 buses is run, screened out or not.
/// Source: identity of the DC model; exact (no load lost, no unit moved, one stage).
#[test]
fn a_pair_that_was_screened_out_moves_nothing_under_any_scheme() {
    let tree = |grid: Grid| {
        let division = divide(&grid, &Default::default(), &mut |_| true).unwrap();
        divided(&grid, &division.choices.best[0].opened)
    };
    let published = data_grid("ieee39_3areas.grid.toml");
    for (grid, every, schemes) in [
        (tree(builtin_grid()), 1, &Balancing::ALL[..]),
        (tree(published.clone()), 2, &Balancing::ALL[..]),
        (published, 2, &Balancing::ALL[1..]),
    ] {
        let case = cases(&grid, &[2.5]).remove(0);
        let screened = pairs(&[&case], schemes.contains(&Balancing::Steward)).unwrap();
        let lines = outage::lines(&case.grid);
        let (mut left_out, mut silent) = (0, 0);
        for (i, a) in lines.iter().enumerate() {
            for b in lines.iter().skip(i + 1).step_by(every) {
                let (Outage::Line(a), Outage::Line(b)) = (*a, *b) else { continue };
                let pair = Outage::Lines(a, b);
                if screened.pairs.contains(&pair) {
                    silent += 1;
                    continue;
                }
                left_out += 1;
                for &scheme in schemes {
                    let ended = cascade(&case, pair, scheme);
                    let row = Row::of_cascade(&ended, pair, scheme);
                    let still = row.stages == 1 && row.rung == 0 && row.moved_mw < 1e-3;
                    assert!(still && row.load_lost_mw == 0.0, "{row:?}");
                }
            }
        }
        println!(
            "{}: {} pairs, {} screened out; {left_out} of those run here, {silent} can matter",
            case.grid.name,
            screened.looked_at,
            screened.screened_out()
        );
        assert!(left_out > 0 && silent > 0);
    }
}
