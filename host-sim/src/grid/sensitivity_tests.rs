use super::*;
use crate::grid::samples::{add_bus, add_line, empty, new_england};

/// Two triangles joined by a bridge (line 3).
fn barbell() -> Grid {
    let mut grid = empty(50.0);
    for _ in 0..6 {
        add_bus(&mut grid, 0.0);
    }
    for (from, to, reactance_pu) in
        [(0, 1, 0.1), (1, 2, 0.2), (2, 0, 0.3), (2, 3, 0.1), (3, 4, 0.1), (4, 5, 0.1), (5, 3, 0.1)]
    {
        add_line(&mut grid, from, to, reactance_pu);
    }
    grid
}

#[test]
fn transfers_leave_blocks_they_do_not_pass_exactly_alone() {
    let factors = Sensitivity::new(&barbell(), &[true; 7]).unwrap();
    let column = factors.transfer_column(4, 5).unwrap();
    assert_eq!(&column[..4], &[0.0; 4]);
    assert!((column[5] - 2.0 / 3.0).abs() < 1e-12);
    let column = factors.ptdf_column(4).unwrap();
    assert_eq!(column[3], -1.0);
}

#[test]
fn outages_stay_inside_their_block_and_bridges_island() {
    let factors = Sensitivity::new(&barbell(), &[true; 7]).unwrap();
    assert_eq!(factors.outage(3).unwrap(), Outage::Islands);
    let Outage::Factors(after) = factors.outage(0).unwrap() else {
        panic!("line 0 is in a loop");
    };
    assert_eq!(after[0], -1.0);
    assert_eq!(&after[3..], &[0.0; 4]);
    // The rest of the triangle carries all of it, the other way round.
    assert!((after[1] + 1.0).abs() < 1e-12 && (after[2] + 1.0).abs() < 1e-12);
}

#[test]
fn an_open_line_has_no_outage() {
    let mut closed = [true; 7];
    closed[5] = false;
    let factors = Sensitivity::new(&barbell(), &closed).unwrap();
    assert_eq!(factors.outage(5).unwrap(), Outage::Open);
    assert_eq!(factors.outage(4).unwrap(), Outage::Islands);
}

#[test]
fn one_of_two_parallel_lines_hands_all_to_the_other() {
    let mut grid = empty(50.0);
    add_bus(&mut grid, 0.0);
    add_bus(&mut grid, 0.0);
    add_line(&mut grid, 0, 1, 0.1);
    add_line(&mut grid, 1, 0, 0.3);
    let factors = Sensitivity::new(&grid, &[true; 2]).unwrap();
    assert!((factors.transfer_column(0, 1).unwrap()[0] - 0.75).abs() < 1e-12);
    let Outage::Factors(after) = factors.outage(0).unwrap() else {
        panic!("parallel lines are no bridges");
    };
    assert!((after[1] + 1.0).abs() < 1e-12);
}

#[test]
fn a_transfer_between_islands_is_refused() {
    let mut closed = [true; 7];
    closed[3] = false;
    let factors = Sensitivity::new(&barbell(), &closed).unwrap();
    assert!(matches!(factors.transfer_column(0, 4), Err(DcError::Imbalance { .. })));
}

#[test]
fn outage_factors_agree_with_solving_again_on_39_buses() {
    let grid = new_england();
    let mut closed = vec![true; grid.lines.len()];
    let mut injection: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in &grid.units {
        injection[unit.bus] += unit.base_mw;
    }
    let factors = Sensitivity::new(&grid, &closed).unwrap();
    let before = factors.network().flows_mw(&injection).unwrap().flow_mw;
    let mut bridges = 0;
    for line in 0..grid.lines.len() {
        let after = match factors.outage(line).unwrap() {
            Outage::Factors(after) => after,
            _ => {
                bridges += 1;
                continue;
            }
        };
        closed[line] = false;
        let again = DcNetwork::new(&grid, &closed).unwrap().flows_mw(&injection).unwrap();
        closed[line] = true;
        for (other, flow) in again.flow_mw.iter().enumerate() {
            let predicted = before[other] + after[other] * before[line];
            assert!((predicted - flow).abs() < 1e-7, "{line} {other}");
        }
    }
    // Nine machine transformers and the branch 19-20 chain islands; counted by
    // the definition in `graph`.
    assert_eq!(bridges, factors.blocks().is_bridge.iter().filter(|&&b| b).count());
    assert!(bridges >= 9);
}
