//! Feeders: what is shed, how it returns, and who may let it.

use crate::common::{Area, Said, Steward32, World, listen};
use hedgerow_protocol::charter::Feeder;
use hedgerow_protocol::message::{Message, Restore, Rung};
use proptest::prelude::*;

/// One bus with load, a unit and a row of feeders, on a line to another bus with a unit.
struct Desk {
    steward: Steward32,
    world: World,
    tick: u32,
}

impl Desk {
    fn new(feeders: &[Feeder]) -> Self {
        let mut area = Area::random(5, 77);
        area.feeders = feeders.to_vec();
        area.ties.truncate(1);
        area.ties[0].schedule = 0.0;
        area.units.iter_mut().for_each(|unit| unit.available = true);
        area.settle();
        area.lines.iter_mut().for_each(|line| line.rating = 50.0);
        area.settings.climb_ticks = 10;
        let mut steward = Steward32::new();
        steward.load(&area.charter()).unwrap();
        Self { steward, world: World::new(&area), tick: 0 }
    }

    /// Emergency range that is left above the load now, pu.
    fn room(&self) -> f64 {
        let most: f64 = self.world.area.units.iter().map(|u| f64::from(u.emergency_high)).sum();
        most - self.world.load.iter().sum::<f64>()
    }

    fn pass(&mut self, ticks: u32) -> Vec<Said> {
        let pass = |desk: &mut Self| {
            let mut snapshot = desk.world.measure();
            for (reading, feeder) in
                snapshot.feeder_load_mw.iter_mut().zip(&desk.world.area.feeders)
            {
                reading.value = 100.0 * feeder.load;
            }
            snapshot.tell(desk.tick, |m| desk.steward.hear(m));
            let said = listen(&mut desk.steward, desk.tick);
            desk.world.obey(&said);
            for (shed, mw) in desk.world.shed.iter_mut().zip(&said.shed_mw) {
                *shed = f64::from(*mw) / 100.0;
            }
            desk.tick += 1;
            said
        };
        (0..ticks).map(|_| pass(self)).collect()
    }

    /// Raise the load until `missing` pu can not be served, and wait for the end of it.
    fn overload(&mut self, missing: f64) -> Vec<Said> {
        let room = self.room();
        self.world.load[0] += room + missing;
        self.pass(500)
    }
}

fn feeder(load: f32, switched: bool, automatic: bool) -> Feeder {
    Feeder { bus: 0, load, price: 60.0, curvature: 1.0, switched, automatic }
}

fn total(said: &Said) -> f32 {
    said.shed_mw.iter().sum()
}

#[test]
fn sheds_what_is_missing_and_no_more() {
    let mut desk = Desk::new(&[feeder(1.0, false, true), feeder(1.0, false, true)]);
    let said = desk.overload(0.8);
    let last = said.last().unwrap();
    assert_eq!(last.rung, Rung::Shed);
    assert!((total(last) - 80.0).abs() < 0.5, "{}", total(last));
    assert!((last.shed_mw[0] - last.shed_mw[1]).abs() < 0.5, "equal prices share evenly");
}

#[test]
fn continuous_load_returns_no_faster_than_its_ramp() {
    let mut desk = Desk::new(&[feeder(1.0, false, true), feeder(1.0, false, true)]);
    let mut last = total(desk.overload(0.8).last().unwrap());
    desk.world.load[0] -= 3.0;
    let s = desk.world.area.settings;
    let step = 100.0 * s.return_ramp * s.tick_s;
    let (mut held, mut free) = (0, 0);
    for _ in 0..600 {
        let freq_dev_hz = desk.world.measure().freq_dev_hz[0].value;
        let now = total(&desk.pass(1)[0]);
        if freq_dev_hz > s.return_free_hz {
            free += u32::from(now < last - step);
        } else {
            assert!(now >= last - step - 1e-2, "fell by {} MW in a tick", last - now);
            held += u32::from(now < last);
        }
        last = now;
    }
    assert!(held > 0 || free > 0, "nothing returned");
    assert!(last < 0.1, "{last} MW still off");
    assert_eq!(desk.steward.rung(), Rung::Keep);
}

#[test]
fn opens_one_breaker_at_a_time_and_the_smallest_that_covers() {
    let sizes = [0.9, 0.3, 0.5, 1.4];
    let feeders: Vec<Feeder> = sizes.iter().map(|&load| feeder(load, true, true)).collect();
    let mut desk = Desk::new(&feeders);
    let said = desk.overload(0.4);
    let opened = |said: &Said| said.shed_mw.iter().filter(|&&mw| mw > 0.1).count();
    for (before, after) in said.iter().zip(&said[1..]) {
        assert!(opened(after) <= opened(before) + 1, "two breakers in one tick");
    }
    let last = said.last().unwrap();
    assert_eq!(opened(last), 1, "{:?}", last.shed_mw);
    assert!((last.shed_mw[2] - 50.0).abs() < 0.1, "{:?}", last.shed_mw);
}

#[test]
fn takes_the_largest_first_when_none_covers() {
    let sizes = [0.3, 0.5, 0.4];
    let feeders: Vec<Feeder> = sizes.iter().map(|&load| feeder(load, true, true)).collect();
    let mut desk = Desk::new(&feeders);
    let said = desk.overload(0.75);
    let first = said.iter().find(|said| total(said) > 0.1).unwrap();
    assert!((first.shed_mw[1] - 50.0).abs() < 0.1, "{:?}", first.shed_mw);
    // 0.25 pu are missing after it: the smallest that covers is 0.3.
    let last = said.last().unwrap();
    assert!((last.shed_mw[0] - 30.0).abs() < 0.1, "{:?}", last.shed_mw);
    assert!((total(last) - 80.0).abs() < 0.2, "{:?}", last.shed_mw);
}

#[test]
fn a_breaker_is_all_or_nothing() {
    let mut desk = Desk::new(&[feeder(0.6, true, true), feeder(0.9, true, false)]);
    for said in desk.overload(0.5) {
        for (mw, load) in said.shed_mw.iter().zip([60.0, 90.0]) {
            assert!(*mw == 0.0 || (mw - load).abs() < 0.1, "{:?}", said.shed_mw);
        }
    }
}

#[test]
fn feeders_of_the_operator_stay_off_until_he_lets_them_back() {
    for switched in [false, true] {
        let mut desk = Desk::new(&[feeder(0.8, switched, false)]);
        let last = desk.overload(0.5).pop().unwrap();
        assert!(total(&last) > 45.0, "switched {switched}: {:?}", last.shed_mw);
        assert_eq!(last.feeders_locked, 1, "switched {switched}");
        desk.world.load[0] -= 3.0;
        let held = desk.pass(400).pop().unwrap();
        assert!(total(&held) > 45.0, "switched {switched}: came back alone, {:?}", held.shed_mw);
        let tick = desk.tick;
        assert!(desk.steward.hear(&Message::Restore(Restore { tick })));
        let after = desk.pass(800).pop().unwrap();
        assert_eq!(after.feeders_locked, 0, "switched {switched}");
        assert!(total(&after) < 0.1, "switched {switched}: {:?}", after.shed_mw);
        assert_eq!(after.rung, Rung::Keep, "switched {switched}");
    }
}

#[test]
fn automatic_breakers_return_one_by_one() {
    let feeders = [feeder(0.4, true, true), feeder(0.5, true, true)];
    let mut desk = Desk::new(&feeders);
    let last = desk.overload(0.7).pop().unwrap();
    assert!((total(&last) - 90.0).abs() < 0.2, "{:?}", last.shed_mw);
    desk.world.load[0] -= 4.0;
    let said = desk.pass(1200);
    let closed = |said: &Said| said.shed_mw.iter().filter(|&&mw| mw < 0.1).count();
    for (before, after) in said.iter().zip(&said[1..]) {
        assert!(closed(after) <= closed(before) + 1, "two breakers in one tick");
    }
    assert!(total(said.last().unwrap()) < 0.1);
}

proptest! {
    #![proptest_config(crate::share(8))]

    #[test]
    fn the_end_is_at_most_one_breaker_above_the_least(
        sizes in prop::collection::vec(0.1_f32..0.8, 2..7),
        part in 0.1_f64..0.8,
    ) {
        let feeders: Vec<Feeder> = sizes.iter().map(|&load| feeder(load, true, true)).collect();
        let missing = part * f64::from(sizes.iter().sum::<f32>());
        let mut desk = Desk::new(&feeders);
        let last = desk.overload(missing).pop().unwrap();
        let most = sizes.iter().fold(0.0_f32, |most, &size| most.max(size));
        let (shed, missing) = (total(&last), 100.0 * missing as f32);
        prop_assert!(shed >= missing - 0.5, "{shed} of {missing} MW");
        prop_assert!(shed <= missing + 100.0 * most + 0.5, "{shed} of {missing} MW");
    }
}
