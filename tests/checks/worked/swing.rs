//! Swings in closed form: one machine on a stiff bus, two areas, and the
//! system frequency response with a reheat turbine.

use super::{Machine, Text, USUAL, close, step_load};
use hedgerow::case::model::{Grid, Happening};
use hedgerow::plant::Plant;
use hedgerow::record::Scheme;

/// One machine of 100 MVA on a bus that is 15 000 times as heavy and damped, so that it stands still.
fn machine_on_stiff_bus(inertia_s: f64, damping_pu: f64, synchronising_pu: f64) -> Grid {
    let machine = Machine {
        rating_mva: 100.0,
        base_mw: 60.0,
        inertia_s,
        droop_percent: None,
        damping_pu,
        ..USUAL
    };
    let stiff = Machine {
        rating_mva: 100_000.0,
        base_mw: 0.0,
        inertia_s: 30.0,
        droop_percent: None,
        damping_pu: 100.0,
        ..USUAL
    };
    let mut text = Text::new(1)
        .bus("Machine", 1, 0.0, 0.0)
        .bus("Stiff", 1, 60.0, 0.0)
        .line("Machine", "Stiff", 1.0 / synchronising_pu)
        .unit("G1", "Machine", machine);
    for name in ["S1", "S2", "S3", "S4", "S5"] {
        text = text.unit(name, "Stiff", stiff);
    }
    text.grid()
}

/// Source: H. Saadat 1999, examples 11.2 and 11.3 (H 9.94 s, D 0.138, Ps 1.9884), from memory, recomputed; tolerance 0.01 deg on the closed form, 5e-4 Hz on 0.9549 Hz, 0.01 deg on 5.76 deg.
#[test]
fn machine_of_saadat_11_2_and_11_3_swings_as_printed() {
    let (inertia_s, damping, synchronising_pu) = (9.94, 0.138, 1.988_369);
    let omega_0 = std::f64::consts::TAU * 60.0;
    // The book's D is per rad/s, ours per pu of frequency.
    let grid = machine_on_stiff_bus(inertia_s, damping * omega_0, synchronising_pu);
    let step_s = 0.01;
    let mut plant = Plant::new(&grid, step_s).unwrap();
    let across = |plant: &Plant| plant.bus_angle_rad()[0] - plant.bus_angle_rad()[1];
    let start_rad = across(&plant);
    // Mechanical power 0.2 pu up: the unit has neither lag nor ramp limit.
    plant.set_unit_setpoint_mw(0, 80.0);
    let mass = inertia_s / (std::f64::consts::PI * 60.0);
    let natural = (synchronising_pu / mass).sqrt();
    let zeta = 0.5 * damping / (synchronising_pu * mass).sqrt();
    let damped = natural * (1.0 - zeta * zeta).sqrt();
    close(damped / std::f64::consts::TAU, 0.9549, 5e-4);
    close(zeta, 0.2131, 5e-5);
    let rest_rad = 0.2 / synchronising_pu;
    let mut crossings_s = Vec::new();
    for step in 1..=2000 {
        let before_rad = across(&plant) - start_rad - rest_rad;
        plant.step();
        let time_s = f64::from(step) * step_s;
        let decay = (-zeta * natural * time_s).exp();
        let phase = damped * time_s;
        let closed_rad =
            rest_rad * (1.0 - decay * (phase.cos() + zeta * natural / damped * phase.sin()));
        let found_rad = across(&plant) - start_rad;
        close(found_rad.to_degrees(), closed_rad.to_degrees(), 0.01);
        let after_rad = found_rad - rest_rad;
        if before_rad * after_rad < 0.0 && crossings_s.len() < 5 {
            crossings_s.push(time_s - step_s * after_rad / (after_rad - before_rad));
        }
    }
    // Crossings of the rest angle are half a damped period apart.
    let period_s = 2.0 * (crossings_s[4] - crossings_s[0]) / 4.0;
    close(1.0 / period_s, 0.9549, 5e-4);
    close((across(&plant) - start_rad).to_degrees(), 5.76, 0.01);
}

/// Source: two areas on one tie, closed form omega = sqrt(w0 Ps (1/(2 H1 S1) + 1/(2 H2 S2))) (O. Elgerd, Electric Energy Systems Theory, ch. 9); tolerance 1e-6 of the frequency.
#[test]
fn two_areas_swing_at_the_frequency_of_the_synchronising_coefficient() {
    let (inertia_s, ratings_mva, reactance_pu) = ([5.0, 4.0], [1000.0, 600.0], 0.05);
    let machine = |area: usize| Machine {
        rating_mva: ratings_mva[area],
        base_mw: 300.0,
        inertia_s: inertia_s[area],
        droop_percent: None,
        ..USUAL
    };
    let grid = Text::new(2)
        .bus("B1", 1, 300.0, 0.0)
        .bus("B2", 2, 300.0, 0.0)
        .line("B1", "B2", reactance_pu)
        .unit("G1", "B1", machine(0))
        .unit("G2", "B2", machine(1))
        .grid();
    let synchronising_mw = grid.base_mva / reactance_pu;
    let inverse: f64 = (0..2).map(|area| 1.0 / (2.0 * inertia_s[area] * ratings_mva[area])).sum();
    let omega = (std::f64::consts::TAU * 60.0 * synchronising_mw * inverse).sqrt();
    let step_s = 0.001;
    let mut plant = Plant::new(&grid, step_s).unwrap();
    plant.apply(&Happening::LoadStep { bus: 0, mw: 50.0 }).unwrap();
    plant.step();
    let apart = |plant: &Plant| plant.bus_freq_dev_hz()[0] - plant.bus_freq_dev_hz()[1];
    let mut crossings_s = Vec::new();
    for step in 2..20_000 {
        let before = apart(&plant);
        plant.step();
        let after = apart(&plant);
        if before * after < 0.0 {
            crossings_s.push(f64::from(step) * step_s - step_s * after / (after - before));
        }
    }
    let half_periods = crossings_s.len() - 1;
    let half_period_s = (crossings_s[half_periods] - crossings_s[0]) / half_periods as f64;
    let found = std::f64::consts::PI / half_period_s;
    assert!(half_periods > 20);
    close(found / omega, 1.0, 1e-6);
}

/// Source: P. Anderson, M. Mirheydar, IEEE Trans. Power Systems 5(3), 1990 (H 4, TR 8, FH 0.3, R 0.05, D 1, Km 0.95), formulae from memory, digits own; tolerance 1e-6 pu on -0.0216635 pu, 0.011 s on 2.3688 s.
#[test]
fn reheat_response_of_anderson_and_mirheydar_has_its_lowest_point_where_computed() {
    // Our units have one lag. (1 + FH TR s)/(1 + TR s) = FH + (1 - FH)/(1 + TR s), so a unit
    // without lag and one of 8 s make the reheat turbine exactly; nothing else differs.
    let (gain, high_pressure) = (0.95 / 0.05, 0.3);
    let part = |share: f64, inertia_s: f64, damping_pu: f64, lag_s: f64| Machine {
        droop_percent: Some(100.0 / (gain * share)),
        inertia_s,
        damping_pu,
        lag_s,
        ..USUAL
    };
    let grid = Text::new(1)
        .bus("B1", 1, 1000.0, 0.0)
        .unit("G1", "B1", part(high_pressure, 4.0, 1.0, 0.0))
        .unit("G2", "B1", part(1.0 - high_pressure, 0.0, 0.0, 8.0))
        .grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 200.0), 200.0, "");
    let lowest = &run.extremes.lowest_frequency_hz;
    close((lowest.value - 60.0) / 60.0, -0.021_663_53, 1e-6);
    close(lowest.at_s - 1.0, 2.3688, 0.011);
    let rest_pu = *run.series.area_freq_dev_hz[0].last().unwrap() / 60.0;
    close(rest_pu, -0.2 / (gain + 1.0), 1e-6);
}
