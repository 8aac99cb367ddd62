//! Optimal equilibria and impossible cases of the 39-bus system, stated as one area.
//!
//! Contract: unknowns are the changes of the ten machines; rows are the balance
//! (of the grid, or of each of two areas) and the limited lines, with flows from
//! the base flows and the plain direct-current sensitivities.

use hedgerow_tests::board::Board;
use hedgerow_tests::detector::{Facts, THRESHOLD, trial};
use hedgerow_tests::exact;
use hedgerow_tests::grounded::{inverse, laplacian};
use hedgerow_tests::programme::{Kind, Programme};
use serde::Deserialize;

/// Range of a machine that has none stated, pu.
const WIDE: f64 = 20.0;
const BASE_MVA: f64 = 100.0;

#[derive(Deserialize)]
struct Table {
    load_bus: usize,
    load_mw: f64,
    buses: usize,
    machine_bus: Vec<usize>,
    cost: Vec<f64>,
    rating_mva: Vec<f64>,
    first_area: Vec<usize>,
    from: Vec<usize>,
    to: Vec<usize>,
    reactance_pu: Vec<f64>,
    base_flow_mw: Vec<f64>,
    case: Vec<Case>,
}

#[derive(Deserialize)]
struct Case {
    name: String,
    area_balance: bool,
    box_share: f64,
    limits: Vec<(usize, usize, f64)>,
    p_mw: Option<Vec<f64>>,
    cost_pu: Option<f64>,
    certificate_value_pu: Option<f64>,
}

fn table() -> Table {
    toml::from_str(include_str!("../../data/opt39.toml")).unwrap()
}

/// One area's problem: weights of each row per bus, then columns of the machines.
fn programme(table: &Table, case: &Case) -> Programme {
    let (mut weights, mut l, mut r) = (vec![], vec![], vec![]);
    let inside = |bus: usize| table.first_area.contains(&bus);
    let sides: Vec<Vec<f64>> = if case.area_balance {
        let side = |first| (1..=table.buses).map(|b| f64::from(inside(b) == first)).collect();
        vec![side(true), side(false)]
    } else {
        vec![vec![1.0; table.buses]]
    };
    for side in sides {
        let load = side[table.load_bus - 1] * table.load_mw / BASE_MVA;
        weights.push(side);
        l.push(load);
        r.push(load);
    }
    let n_eq = weights.len();
    let x = inverse(laplacian(table.buses, &lines(table)));
    for &(from, to, limit) in &case.limits {
        let line =
            (0..table.from.len()).find(|&k| (table.from[k], table.to[k]) == (from, to)).unwrap();
        let row: Vec<f64> = (0..table.buses)
            .map(|bus| (x[from - 1][bus] - x[to - 1][bus]) / table.reactance_pu[line])
            .collect();
        let load = -row[table.load_bus - 1] * table.load_mw;
        let fixed = (table.base_flow_mw[line] + load) / BASE_MVA;
        weights.push(row);
        l.push(-limit / BASE_MVA - fixed);
        r.push(limit / BASE_MVA - fixed);
    }
    let machines = |row: &Vec<f64>| table.machine_bus.iter().map(|&bus| row[bus - 1]).collect();
    let range = |rating: &f64| match case.box_share {
        0.0 => WIDE,
        share => share * rating / BASE_MVA,
    };
    let high: Vec<f64> = table.rating_mva.iter().map(range).collect();
    let count = high.len();
    Programme {
        a: weights.iter().map(machines).collect(),
        l,
        r,
        lo: high.iter().map(|high| -high).collect(),
        hi: high,
        q: table.cost.clone(),
        x0: vec![0.0; count],
        w: vec![0.0; count],
        kinds: vec![Kind::Unit; count],
        n_eq,
    }
}

fn lines(table: &Table) -> Vec<(usize, usize, f64)> {
    let ends = table.from.iter().zip(&table.to);
    ends.zip(&table.reactance_pu).map(|((f, t), &x)| (f - 1, t - 1, x)).collect()
}

/// Source: T. Athay, R. Podmore, S. Virmani, 1979, and M. A. Pai, 1989 (network from memory); optima recomputed by two methods; tolerance 1e-3 pu in set-points, 1e-4 in cost.
#[test]
fn law_rests_at_the_optimal_equilibria_of_the_39_bus_system() {
    let table = table();
    let mut seen = 0;
    for case in &table.case {
        let (Some(best), Some(cost)) = (&case.p_mw, case.cost_pu) else { continue };
        let programme = programme(&table, case);
        let mut board = Board::new(&programme);
        board.run(1000);
        let point = board.point();
        for (have, want_mw) in point.iter().zip(best) {
            let want = want_mw / BASE_MVA;
            assert!((have - want).abs() < 1e-3, "{}: {have} for {want}", case.name);
        }
        assert!(programme.violation(&point) < 1e-3, "{}", case.name);
        assert!((programme.cost(&point) - cost).abs() < 1e-4, "{}", case.name);
        let found = trial(&mut board, &Facts::new(&programme), 50, 20, false);
        assert!(found.claimed <= 1e-6, "{}: {}", case.name, found.claimed);
        seen += 1;
    }
    assert_eq!(seen, 5);
}

/// Source: J. Farkas, "Theorie der einfachen Ungleichungen", 1902, on the network of M. A. Pai, 1989 (from memory); certificates recomputed; the published vector's value within 1e-5 pu.
#[test]
fn impossible_cases_of_the_39_bus_system_are_proven() {
    let table = table();
    let mut seen = 0;
    for case in &table.case {
        let Some(value) = case.certificate_value_pu else { continue };
        let programme = programme(&table, case);
        let facts = Facts::new(&programme);
        // The table's vector has one entry of size one: the line below its limit, or the balance.
        let mut dual = vec![0.0; programme.rows()];
        let last = dual.len() - 1;
        dual[last] = if last == 0 { 1.0 } else { -1.0 };
        let tried = [dual.clone(), dual.iter().map(|y| -y).collect()].map(|y| facts.proven(&y));
        let proven = tried[0].max(tried[1]);
        assert!((f64::from(proven) + value).abs() < 1e-5, "{}: {tried:?} for {value}", case.name);
        let found = trial(&mut Board::new(&programme), &facts, 20, 60, true);
        assert!(found.tick.is_some() && found.claimed > THRESHOLD, "{}", case.name);
        assert!(facts.proven_f64(&found.dual) >= f64::from(found.claimed), "{}", case.name);
        assert!(exact::sign(&facts.terms(&found.dual, found.claimed)) >= 0, "{}", case.name);
        assert!(f64::from(found.claimed) <= programme.least_violation() + 1e-6, "{}", case.name);
        seen += 1;
    }
    assert_eq!(seen, 2);
}
