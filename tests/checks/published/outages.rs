//! Transfer and outage factors of the published systems: identities that hold
//! for any network, and re-solved flows.

use super::{base_injection_mw, solve, system, systems};
use hedgerow::grid::dc::DcNetwork;
use hedgerow::grid::sensitivity::{Outage, Sensitivity};

fn all(count: usize) -> Vec<bool> {
    vec![true; count]
}

/// Bridges of each system as pairs of bus numbers, in file order, by counting components.
const BRIDGES: [(usize, &[&str]); 4] = [
    (0, &["B7-B8"]),
    (1, &["B9-B11", "B12-B13", "B25-B26"]),
    (
        2,
        &[
            "B2-B30", "B6-B31", "B10-B32", "B16-B19", "B19-B20", "B19-B33", "B20-B34", "B22-B35",
            "B23-B36", "B25-B37", "B29-B38",
        ],
    ),
    (3, &["B32-B33"]),
];

/// Source: bridges of the 14-, 30-, 39- and 57-bus systems, recomputed with a graph library; tolerance none.
#[test]
fn bridges_of_the_published_systems_are_known() {
    let systems: Vec<_> = systems().collect();
    for (index, names) in BRIDGES {
        let grid = &systems[index].grid;
        let sensitivity = Sensitivity::new(grid, &all(grid.lines.len())).unwrap();
        let bridges = grid.lines.iter().zip(&sensitivity.blocks().is_bridge);
        let found: Vec<&str> =
            bridges.filter(|(_, is)| **is).map(|(line, _)| line.name.as_str()).collect();
        assert_eq!(found, names, "{}", grid.name);
    }
}

/// Source: R. M. Foster, "The average impedance of an electrical network", 1949: the shares of the lines add up to buses less one; tolerance 1e-9.
#[test]
fn own_transfer_shares_add_up_to_buses_less_one() {
    for system in systems() {
        let grid = &system.grid;
        let sensitivity = Sensitivity::new(grid, &all(grid.lines.len())).unwrap();
        let mut sum = 0.0;
        for (index, line) in grid.lines.iter().enumerate() {
            let share = sensitivity.transfer_column(line.from, line.to).unwrap()[index];
            let is_bridge = sensitivity.blocks().is_bridge[index];
            assert_eq!((share - 1.0).abs() < 1e-12, is_bridge, "{} {share}", line.name);
            sum += share;
        }
        let expected = grid.buses.len() as f64 - 1.0;
        assert!((sum - expected).abs() < 1e-9, "{}: {sum}", grid.name);
    }
}

/// Source: locality of outages: factors between different blocks are zero (matroid theory; recomputed); tolerance none (exactly 0).
#[test]
fn outage_factors_across_bridges_are_zero() {
    for system in systems() {
        let grid = &system.grid;
        let sensitivity = Sensitivity::new(grid, &all(grid.lines.len())).unwrap();
        let block = sensitivity.blocks().block_of_edge.clone();
        for (index, line) in grid.lines.iter().enumerate() {
            match sensitivity.outage(index).unwrap() {
                Outage::Factors(factors) => {
                    let elsewhere = factors.iter().zip(&block).filter(|(_, b)| **b != block[index]);
                    assert!(
                        elsewhere.into_iter().all(|(factor, _)| *factor == 0.0),
                        "{}",
                        line.name
                    );
                }
                Outage::Islands => assert!(sensitivity.blocks().is_bridge[index]),
                Outage::Open => panic!("{} is closed", line.name),
            }
        }
    }
}

/// Source: outage factors against a new solution of the network without the line, six published systems; tolerance 1e-6 MW.
#[test]
fn outage_factors_give_the_flows_of_a_new_solution() {
    for system in systems() {
        let grid = &system.grid;
        let injection_mw = base_injection_mw(grid);
        let before_mw = solve(grid, &injection_mw).flow_mw;
        let sensitivity = Sensitivity::new(grid, &all(grid.lines.len())).unwrap();
        // Every third line of the large systems is enough to see a wrong row.
        let stride = if grid.lines.len() > 100 { 3 } else { 1 };
        for out in (0..grid.lines.len()).step_by(stride) {
            let Outage::Factors(factors) = sensitivity.outage(out).unwrap() else { continue };
            let mut closed = all(grid.lines.len());
            closed[out] = false;
            let after_mw =
                DcNetwork::new(grid, &closed).unwrap().flows_mw(&injection_mw).unwrap().flow_mw;
            for line in (0..grid.lines.len()).filter(|&line| line != out) {
                let predicted_mw = before_mw[line] + factors[line] * before_mw[out];
                assert!(
                    (predicted_mw - after_mw[line]).abs() < 1e-6,
                    "{}: {} without {}",
                    grid.name,
                    grid.lines[line].name,
                    grid.lines[out].name
                );
            }
        }
    }
}

/// Source: with one tie left between the two parts of the 39-bus system an outage inside a part moves no flow of the other, recomputed; tolerance 1e-9 MW.
#[test]
fn areas_joined_in_a_tree_do_not_feel_each_others_outages() {
    let grid = system("ieee39_2areas.grid.toml", "ieee39.dc.csv").grid;
    let mut closed = all(grid.lines.len());
    for (index, line) in grid.lines.iter().enumerate() {
        if ["B1-B39", "B14-B15"].contains(&line.name.as_str()) {
            closed[index] = false;
        }
    }
    let injection_mw = base_injection_mw(&grid);
    let flows = |closed: &[bool]| DcNetwork::new(&grid, closed).unwrap().flows_mw(&injection_mw);
    let before_mw = flows(&closed).unwrap().flow_mw;
    let area = |line: usize| grid.buses[grid.lines[line].from].area;
    let mut tried = 0;
    for out in (0..grid.lines.len()).filter(|&line| closed[line]) {
        let mut without = closed.clone();
        without[out] = false;
        // An outage that islands leaves a piece out of balance and is no case of this rule.
        let Ok(after) = flows(&without) else { continue };
        tried += 1;
        for line in (0..grid.lines.len()).filter(|&line| area(line) != area(out)) {
            assert!((after.flow_mw[line] - before_mw[line]).abs() < 1e-9);
        }
    }
    assert!(tried > 20, "{tried}");
}
