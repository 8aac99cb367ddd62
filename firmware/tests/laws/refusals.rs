//! Charters that are not accepted: every reason, from bytes that have just that fault.

use crate::common::{Area, Plan32, Steward32, World, listen};
use hedgerow_firmware::plan::Plan;
use hedgerow_firmware::steward::Steward;
use hedgerow_protocol::charter::{CharterWriter, Header};
use hedgerow_protocol::message::Refusal;
use proptest::prelude::*;

fn area() -> Area {
    Area::random(10, 21)
}

fn refusal(charter: &[u8]) -> Option<Refusal> {
    Steward32::new().load(charter).err()
}

/// The same records under a changed header.
fn with_header(change: impl FnOnce(&mut Header<'_>)) -> Option<Refusal> {
    let area = area();
    let mut header = area.header();
    change(&mut header);
    refusal(&area.charter_with(&header, 0))
}

fn with_area(change: impl FnOnce(&mut Area)) -> Option<Refusal> {
    let mut area = area();
    change(&mut area);
    refusal(&area.charter())
}

/// Bytes under a right checksum.
fn sealed(body: &[u8]) -> Vec<u8> {
    let mut room = vec![0; body.len() + 64];
    let mut writer = CharterWriter::new(&mut room);
    body.iter().for_each(|byte| writer.put(byte).unwrap());
    writer.finish().unwrap().to_vec()
}

#[test]
fn takes_the_charter_that_the_others_are_made_from() {
    assert_eq!(refusal(&area().charter()), None);
}

#[test]
fn refuses_what_is_no_charter_at_all() {
    assert_eq!(refusal(&[]), Some(Refusal::NoCharter));
    assert_eq!(refusal(&[1, 2, 3]), Some(Refusal::NoCharter));
}

#[test]
fn refuses_another_layout_before_reading_it() {
    assert_eq!(with_header(|header| header.format = 2), Some(Refusal::Version));
}

#[test]
fn refuses_a_charter_that_is_cut_short_or_too_long() {
    let charter = area().charter();
    let body = &charter[..charter.len() - 4];
    assert_eq!(refusal(&sealed(&body[..body.len() - 1])), Some(Refusal::Malformed));
    assert_eq!(refusal(&sealed(&[body, &[0]].concat())), Some(Refusal::Malformed));
    assert_eq!(refusal(&area().charter_with(&area().header(), -1)), Some(Refusal::Malformed));
    assert_eq!(refusal(&area().charter_with(&area().header(), 1)), Some(Refusal::Malformed));
    for len in [1, 5, 40, 200] {
        assert_eq!(refusal(&sealed(&body[..len])), Some(Refusal::Malformed), "{len} bytes");
    }
}

#[test]
fn refuses_an_area_larger_than_any_build() {
    assert_eq!(with_header(|h| h.buses = 65), Some(Refusal::Capacity));
    assert_eq!(with_header(|h| h.lines = 97), Some(Refusal::Capacity));
    assert_eq!(with_header(|h| h.ties = 13), Some(Refusal::Capacity));
    assert_eq!(with_header(|h| h.units = 33), Some(Refusal::Capacity));
    assert_eq!(with_header(|h| h.feeders = 49), Some(Refusal::Capacity));
    assert_eq!(with_header(|h| h.meters = 11), Some(Refusal::Capacity));
}

#[test]
fn refuses_an_area_larger_than_this_build() {
    let charter = area().charter();
    let buses = Plan::<8, 64, 64>::new().load(&charter);
    assert_eq!(buses, Err(Refusal::Capacity), "buses");
    let unknowns = Plan::<16, 8, 64>::new().load(&charter);
    assert_eq!(unknowns, Err(Refusal::Capacity), "unknowns");
    let rows = Plan::<16, 64, 8>::new().load(&charter);
    assert_eq!(rows, Err(Refusal::Capacity), "rows");
    assert_eq!(Plan::<16, 64, 64>::new().load(&charter), Ok(()));
}

#[test]
fn refuses_records_that_refer_to_no_bus() {
    let range = Some(Refusal::Range);
    // The inverse in the charter is that of the area before the change.
    let with = |change: fn(&mut Area)| {
        let (area, mut changed) = (area(), area());
        change(&mut changed);
        let mut room = vec![0; 32 * 1024];
        let mut writer = CharterWriter::new(&mut room);
        writer.put(&changed.header()).unwrap();
        changed.lines.iter().for_each(|line| writer.put(line).unwrap());
        changed.ties.iter().for_each(|tie| writer.put(tie).unwrap());
        changed.units.iter().for_each(|unit| writer.put(unit).unwrap());
        changed.feeders.iter().for_each(|feeder| writer.put(feeder).unwrap());
        changed.meters.iter().for_each(|meter| writer.put(meter).unwrap());
        let x = area.inverse();
        for (row, values) in x.iter().enumerate().skip(1) {
            values[1..=row].iter().for_each(|&value| writer.put(&(value as f32)).unwrap());
        }
        refusal(writer.finish().unwrap())
    };
    assert_eq!(with(|_| {}), None);
    assert_eq!(with(|a| a.lines[0].from = 10), range);
    assert_eq!(with(|a| a.lines[0].to = a.lines[0].from), range);
    assert_eq!(with(|a| a.lines[0].rating = 0.0), range);
    assert_eq!(with(|a| a.lines[0].rating = f32::NAN), range);
    assert_eq!(with(|a| a.lines[0].susceptance = f32::INFINITY), range);
    assert_eq!(with(|a| a.lines[0].susceptance = 0.0), range);
    assert_eq!(with(|a| a.ties[0].bus = 10), range);
    assert_eq!(with(|a| a.units[0].bus = 10), range);
    assert_eq!(with(|a| a.feeders[0].bus = 10), range);
    assert_eq!(with(|a| a.meters[0].bus = 10), range);
    assert_eq!(with(|a| a.meters[0].weight = 0.0), range);
    assert_eq!(with(|a| a.meters.clear()), range);
}

#[test]
fn refuses_numbers_out_of_range() {
    let range = Some(Refusal::Range);
    assert_eq!(with_header(|h| h.address = 0), range);
    assert_eq!(with_header(|h| h.base_mva = 0.0), range);
    assert_eq!(with_header(|h| h.base_mva = f32::NAN), range);
    assert_eq!(with_area(|a| a.ties[0].reactance = 0.0), range);
    assert_eq!(with_area(|a| a.ties[0].schedule = f32::NAN), range);
    assert_eq!(with_area(|a| a.ties[0].rating = -1.0), range);
    assert_eq!(with_area(|a| a.units[0].cost = 0.0), range);
    assert_eq!(with_area(|a| a.units[0].cost = f32::NAN), range);
    assert_eq!(with_area(|a| a.units[0].low = a.units[0].high + 1.0), range);
    assert_eq!(with_area(|a| a.units[0].emergency_low = a.units[0].low + 0.1), range);
    assert_eq!(with_area(|a| a.units[0].emergency_high = f32::INFINITY), range);
    assert_eq!(with_area(|a| a.feeders[0].price = 0.0), range);
    assert_eq!(with_area(|a| a.feeders[0].load = -1.0), range);
    assert_eq!(with_area(|a| a.feeders[0].curvature = f32::NAN), range);
}

#[test]
fn refuses_settings_out_of_range() {
    let range = Some(Refusal::Range);
    assert_eq!(with_header(|h| h.settings.tick_s = 0.0), range);
    assert_eq!(with_header(|h| h.settings.iterations = 0), range);
    assert_eq!(with_header(|h| h.settings.iterations = 1001), range);
    assert_eq!(with_header(|h| h.settings.filter_gain = 1.1), range);
    assert_eq!(with_header(|h| h.settings.lowest_rung = 4), range);
    assert_eq!(with_header(|h| h.settings.proof_ticks = 0), range);
    assert_eq!(with_header(|h| h.settings.proof_threshold = -0.002), range);
    assert_eq!(with_header(|h| h.settings.dual_clamp = f32::NAN), range);
    assert_eq!(with_header(|h| h.settings.damping_pu_per_hz = -1.0), range);
    assert_eq!(with_header(|h| h.settings.agreement_relax = f32::NAN), range);
}

#[test]
fn a_refused_charter_leaves_no_steward_behind() {
    let area = area();
    let mut steward = Steward32::new();
    steward.load(&area.charter()).unwrap();
    let mut bad = area.charter();
    bad[30] ^= 1;
    assert_eq!(steward.load(&bad), Err(Refusal::Checksum));
    assert!(!steward.is_ready());
    assert!(!World::new(&area).measure().tell(0, |m| steward.hear(m)));
    steward.tick(0, &mut |say| panic!("it spoke: {say:?}"));
    steward.load(&area.charter()).unwrap();
    assert_eq!(listen(&mut steward, 1).setpoint_mw.len(), area.units.len());
}

proptest! {
    #[test]
    fn any_changed_byte_fails_the_checksum(place in any::<prop::sample::Index>(), flip in 1_u8..) {
        let mut charter = area().charter();
        let place = place.index(charter.len());
        charter[place] ^= flip;
        prop_assert_eq!(refusal(&charter), Some(Refusal::Checksum));
    }

    #[test]
    fn records_of_random_bytes_never_panic(
        bytes in prop::collection::vec(any::<u8>(), 0..300),
        cut in any::<prop::sample::Index>(),
    ) {
        let charter = area().charter();
        let body = &charter[..charter.len() - 4];
        let mut mixed = body[..cut.index(body.len())].to_vec();
        mixed.extend_from_slice(&bytes);
        let _either = Plan32::new().load(&sealed(&mixed));
        let _either = Steward::<64, 112, 112>::new().load(&bytes);
    }
}
