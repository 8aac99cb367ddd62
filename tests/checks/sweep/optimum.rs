//! The static equilibrium against an interior-point solver.

use hedgerow::sweep::quadratic::Quadratic;
use hedgerow_tests::areas::{Area, ORDINARY};
use hedgerow_tests::board::Board;
use hedgerow_tests::programme::Programme;

/// Problems held against the solver.
const PROBLEMS: u64 = 500;

/// Solve with the sweep's own method: a deviation's price needs it in two parts.
fn solved(p: &Programme) -> Option<Vec<f64>> {
    let mut q = Quadratic::default();
    let mut parts = Vec::new();
    for j in 0..p.cols() {
        let (c, slope) = (p.q[j], -p.q[j] * p.x0[j]);
        parts.push(if p.w[j] > 0.0 && p.lo[j] < 0.0 {
            let up = q.add_variable(c, slope + p.w[j], 0.0, p.hi[j].max(0.0));
            (up, Some(q.add_variable(c, -slope + p.w[j], 0.0, -p.lo[j])))
        } else {
            (q.add_variable(c, slope + p.w[j], p.lo[j], p.hi[j]), None)
        });
    }
    for i in 0..p.rows() {
        let mut row = Vec::new();
        for (a, (up, down)) in p.a[i].iter().zip(&parts) {
            row.resize(up + 1, 0.0);
            row[*up] = *a;
            row.extend(down.map(|_| -a));
        }
        let high = if i < p.n_eq { p.l[i] } else { p.r[i] };
        q.add_row(row, p.l[i], high);
    }
    q.settle().ok()?;
    let x = q.values();
    Some(parts.iter().map(|&(up, down)| x[up] - down.map_or(0.0, |d| x[d])).collect())
}

/// Every tenth problem of the set is also run on the stewards' law in f32.
/// Source: 500 seeded areas, reference by clarabel 1e-10; tolerance 1e-6 pu (f64), 1e-3 pu (f32).
#[test]
fn the_static_equilibrium_is_that_of_an_interior_point_solver() {
    let (mut compared, mut contradictions, mut worst, mut worst_f32) = (0, 0, 0.0_f64, 0.0_f64);
    let mut seed = 0;
    while compared < PROBLEMS {
        seed += 1;
        let problem = Area::random(seed, ORDINARY).programme((seed % 4) as u8);
        let ours = solved(&problem);
        let Some(reference) = problem.optimum() else {
            assert!(ours.is_none(), "seed {seed}: solved, but the reference finds nothing");
            contradictions += 1;
            continue;
        };
        let ours = ours.unwrap_or_else(|| panic!("seed {seed}: the reference has a solution"));
        let distance =
            |x: &[f64]| x.iter().zip(&reference).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        worst = worst.max(distance(&ours));
        if compared % 10 == 0 {
            let mut board = Board::new(&problem);
            board.run(40_000);
            worst_f32 = worst_f32.max(distance(&board.point()));
        }
        compared += 1;
    }
    println!(
        "{compared} problems, {contradictions} contradictory: f64 {worst:.2e}, f32 {worst_f32:.2e} pu"
    );
    assert!(worst < 1e-6, "{worst:e}");
    assert!(worst_f32 < 1e-3, "{worst_f32:e}");
}
