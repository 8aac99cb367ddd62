//! Economic dispatch, found by the steward's own law.
//!
//! A cost a + b P + c P^2 is 1/2 q (x - x0)^2 and a constant, with x = P in pu
//! of 100 MW, q = 2 c 100^2 and x0 = -100 b / q. One balance row makes the
//! outputs add up to the load; its dual is the common marginal cost.

use super::close;
use hedgerow_firmware::law::scale::Column;
use hedgerow_firmware::law::{Iterate, Limits, Problem, Scaled};

/// Base of the law's numbers in MW.
const BASE_MW: f64 = 100.0;
/// Iterations: far more than it takes.
const COUNT: u16 = 4000;
/// Bound of the duals, far above any price here.
const CLAMP: f32 = 1e6;

/// A unit: price per MWh at no output, half slope of the price, limits in MW.
#[derive(Clone, Copy)]
struct Offer {
    b: f64,
    c: f64,
    low_mw: f64,
    high_mw: f64,
}

/// An offer without limits that matter.
fn free(b: f64, c: f64) -> Offer {
    Offer { b, c, low_mw: 0.0, high_mw: 2000.0 }
}

/// A solution: outputs in MW and the price per MWh.
struct Dispatch {
    output_mw: Vec<f64>,
    price: f64,
}

/// Let the law serve a load.
fn dispatch(offers: &[Offer], load_mw: f64) -> Dispatch {
    // A price common to all changes nothing but the dual, and keeps the numbers small.
    let common = offers.iter().map(|offer| offer.b).sum::<f64>() / offers.len() as f64;
    let mut problem = Problem::<16, 8>::new();
    let mut scaled = Scaled::<16, 8>::new();
    for (j, offer) in offers.iter().enumerate() {
        let curvature = 2.0 * offer.c * BASE_MW * BASE_MW;
        problem.curvature[j] = curvature as f32;
        problem.target[j] = (-(offer.b - common) * BASE_MW / curvature) as f32;
        problem.low[j] = (offer.low_mw / BASE_MW) as f32;
        problem.high[j] = (offer.high_mw / BASE_MW) as f32;
        scaled.matrix_mut().put(0, j, 1.0);
    }
    problem.row_low[0] = (load_mw / BASE_MW) as f32;
    problem.row_high[0] = problem.row_low[0];
    let (iterate, dual) = solve(&mut scaled, &problem, offers.len(), 1, 1);
    let output =
        |j: usize| f64::from(iterate.value(&scaled, j, problem.low[j], problem.high[j])) * BASE_MW;
    Dispatch {
        output_mw: (0..offers.len()).map(output).collect(),
        price: common - f64::from(dual[0]) / BASE_MW,
    }
}

/// Scale and iterate; the iterate and the physical duals.
fn solve(
    scaled: &mut Scaled<16, 8>,
    problem: &Problem<16, 8>,
    cols: usize,
    rows: usize,
    eqs: usize,
) -> (Iterate<16, 8>, [f32; 8]) {
    scaled.scale(&problem.curvature[..cols], &vec![Column::Own; cols], rows, eqs, 0..0);
    let mut limits = Limits::new();
    limits.fill(scaled, problem);
    let mut iterate = Iterate::new();
    iterate.run(scaled, &limits, scaled.sigma(), CLAMP, COUNT);
    let mut dual = [0.0; 8];
    scaled.physical_dual(iterate.dual(), &mut dual);
    (iterate, dual)
}

#[track_caller]
fn holds(found: &Dispatch, output_mw: &[f64], tol_mw: f64, price: f64, tol_price: f64) {
    for (found_mw, printed_mw) in found.output_mw.iter().zip(output_mw) {
        close(*found_mw, *printed_mw, tol_mw);
    }
    close(found.price, price, tol_price);
}

/// Source: H. Saadat 1999, example 7.4, from memory, recomputed; tolerance 0.01 MW on 400, 250, 150 MW, 1e-3 on the price 8.5 per MWh.
#[test]
fn law_finds_the_dispatch_of_saadat_7_4() {
    let found = dispatch(&[free(5.3, 0.004), free(5.5, 0.006), free(5.8, 0.009)], 800.0);
    holds(&found, &[400.0, 250.0, 150.0], 0.01, 8.5, 1e-3);
}

/// Source: H. Saadat 1999, example 7.6 (with limits), from memory, recomputed; tolerance 0.01 MW on 450, 325, 200 MW, 1e-3 on the price 9.4.
#[test]
fn law_finds_the_dispatch_within_limits_of_saadat_7_6() {
    let offers = [
        Offer { b: 5.3, c: 0.004, low_mw: 200.0, high_mw: 450.0 },
        Offer { b: 5.5, c: 0.006, low_mw: 150.0, high_mw: 350.0 },
        Offer { b: 5.8, c: 0.009, low_mw: 100.0, high_mw: 225.0 },
    ];
    holds(&dispatch(&offers, 975.0), &[450.0, 325.0, 200.0], 0.01, 9.4, 1e-3);
}

/// Limits of the three units of Wood and Wollenberg.
const RANGES_MW: [(f64, f64); 3] = [(150.0, 600.0), (100.0, 400.0), (50.0, 200.0)];

/// Their offers, with another first one.
fn wood_and_wollenberg(first: (f64, f64), limited: bool) -> Vec<Offer> {
    let prices = [first, (7.85, 0.00194), (7.97, 0.00482)];
    let pairs = prices.into_iter().zip(RANGES_MW);
    pairs
        .map(
            |((b, c), (low_mw, high_mw))| {
                if limited { Offer { b, c, low_mw, high_mw } } else { free(b, c) }
            },
        )
        .collect()
}

/// Source: A. Wood, B. Wollenberg, Power Generation, Operation and Control, example 3A, from memory, recomputed; tolerance 0.05 MW on 393.2, 334.6, 122.2 MW, 1e-3 on 9.148.
#[test]
fn law_finds_the_dispatch_of_wood_and_wollenberg_3a() {
    let found = dispatch(&wood_and_wollenberg((7.92, 0.001562), true), 850.0);
    holds(&found, &[393.2, 334.6, 122.2], 0.05, 9.148, 1e-3);
}

/// Source: A. Wood, B. Wollenberg, example 3B, limits ignored, from memory, recomputed (705.68 MW for unit 1, the remembered 704.6 does not close); tolerance 0.1 MW on 111.8, 32.6, 1e-3 on 8.284.
#[test]
fn law_finds_the_dispatch_of_wood_and_wollenberg_3b_without_limits() {
    let found = dispatch(&wood_and_wollenberg((6.48, 0.001278), false), 850.0);
    holds(&found, &[705.68, 111.8, 32.6], 0.1, 8.284, 1e-3);
}

/// Source: A. Wood, B. Wollenberg, example 3B with limits, from memory, recomputed; tolerance 0.05 MW on 600, 187.1, 62.9 MW, 1e-3 on 8.576.
#[test]
fn law_finds_the_dispatch_of_wood_and_wollenberg_3b_within_limits() {
    let found = dispatch(&wood_and_wollenberg((6.48, 0.001278), true), 850.0);
    holds(&found, &[600.0, 187.1, 62.9], 0.05, 8.576, 1e-3);
}

/// Source: Grainger, Stevenson 1994, examples 13.1 and 13.2 (0.008 P + 8.0, 0.0096 P + 6.4), from memory, recomputed; tolerance 0.01 MW on 400, 500 MW, 1e-3 on 11.2.
#[test]
fn law_finds_the_dispatch_of_grainger_and_stevenson_13_1() {
    let found = dispatch(&[free(8.0, 0.004), free(6.4, 0.0048)], 900.0);
    holds(&found, &[400.0, 500.0], 0.01, 11.2, 1e-3);
}

/// A ring of three equal lines: 1/2 p1^2 + p2^2, p1 + p2 = 3, flow (2 p1 + p2)/3 within a limit.
fn ring(limit: f32) -> ([f64; 2], [f32; 8]) {
    let mut problem = Problem::<16, 8>::new();
    let mut scaled = Scaled::<16, 8>::new();
    problem.curvature[0] = 1.0;
    problem.curvature[1] = 2.0;
    for j in 0..2 {
        problem.low[j] = -10.0;
        problem.high[j] = 10.0;
        scaled.matrix_mut().put(0, j, 1.0);
    }
    scaled.matrix_mut().put(1, 0, 2.0 / 3.0);
    scaled.matrix_mut().put(1, 1, 1.0 / 3.0);
    (problem.row_low[0], problem.row_high[0]) = (3.0, 3.0);
    (problem.row_low[1], problem.row_high[1]) = (-limit, limit);
    let (iterate, dual) = solve(&mut scaled, &problem, 2, 2, 1);
    ([0, 1].map(|j| f64::from(iterate.value(&scaled, j, -10.0, 10.0))), dual)
}

/// Source: own exact case, ring of three lines without a full one: p 2 and 1, price 2; tolerance 1e-5.
#[test]
fn law_finds_the_exact_optimum_of_a_ring() {
    let (found, dual) = ring(10.0);
    close(found[0], 2.0, 1e-5);
    close(found[1], 1.0, 1e-5);
    close(-f64::from(dual[0]), 2.0, 1e-5);
}

/// Source: own exact case, the same ring with a full line: p 1.5 and 1.5, price 4.5, price of the line 4.5; tolerance 1e-4.
#[test]
fn law_finds_the_exact_optimum_of_a_ring_with_a_full_line() {
    let (found, dual) = ring(1.5);
    close(found[0], 1.5, 1e-4);
    close(found[1], 1.5, 1e-4);
    close(-f64::from(dual[0]), 4.5, 1e-4);
    close(f64::from(dual[1]), 4.5, 1e-4);
}
