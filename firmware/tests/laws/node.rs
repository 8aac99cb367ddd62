//! A node behind a wire: whatever comes in, only good frames count.

use crate::common::{Area, Rng, World};
use crate::share;
use hedgerow_firmware::node::Node;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::frame::{Header, PLANT, seal};
use hedgerow_protocol::limits::{FRAME_MAX, WIRE_MAX};
use hedgerow_protocol::message::Message;
use proptest::prelude::*;

type Node32 = Node<32, 64, 64>;
const KEY: [u8; 32] = [7; 32];

fn node(area: &Area) -> Box<Node32> {
    let mut node = Box::new(Node32::new(Key::new(&KEY), 99));
    node.load(&area.charter()).unwrap();
    node
}

fn frame(message: &Message<'_>, to: u8, key: &[u8; 32]) -> Vec<u8> {
    let (mut raw, mut wire) = (vec![0; FRAME_MAX], vec![0; WIRE_MAX]);
    let header = Header { id: 0, from: PLANT, to, boot_id: 5, peer_boot_id: 0, counter: 1 };
    seal(&header, message, &Key::new(key), &mut raw, &mut wire).unwrap().to_vec()
}

/// Every frame of a tick but the status, which counts what was refused.
fn orders(node: &mut Node32, tick: u32) -> Vec<Vec<u8>> {
    let mut frames = Vec::new();
    node.tick(tick, &mut |_, frame| frames.push(frame.to_vec()));
    frames.swap_remove(frames.iter().position(|frame| frame.len() > 40).unwrap());
    frames
}

fn setpoints(node: &Node32) -> Vec<u32> {
    (0..64).map(|unit| node.steward().setpoint(unit).to_bits()).collect()
}

proptest! {
    #![proptest_config(share(4))]

    #[test]
    fn garbage_never_moves_a_set_point(
        seed in any::<u64>(),
        garbage in prop::collection::vec(prop::collection::vec(any::<u8>(), 0..600), 8),
    ) {
        let area = Area::random(8, seed);
        let (mut clean, mut dirty) = (node(&area), node(&area));
        let mut world = World::new(&area);
        world.load[0] += 0.3;
        let snapshot = world.measure();
        for (tick, bytes) in (0..).zip(&garbage) {
            let good = snapshot.tell(tick, |m| frame(m, 1, &KEY));
            clean.receive(&good);
            // The delimiter ends what the garbage began; nothing good is lost to it.
            dirty.receive(bytes);
            dirty.receive(&[0]);
            dirty.receive(&good);
            let before = (setpoints(&clean), clean.counts().accepted);
            prop_assert_eq!(&before, &(setpoints(&dirty), dirty.counts().accepted));
            let (mut a, mut b) = (Vec::new(), Vec::new());
            clean.tick(tick, &mut |to, frame| a.push((to, frame.len())));
            dirty.tick(tick, &mut |to, frame| b.push((to, frame.len())));
            prop_assert_eq!(a.len(), b.len());
            prop_assert_eq!(setpoints(&clean), setpoints(&dirty));
            prop_assert_eq!(clean.steward().rung(), dirty.steward().rung());
        }
    }

    #[test]
    fn a_flipped_bit_is_refused_and_counted(seed in any::<u64>()) {
        let area = Area::random(8, seed);
        let mut node = node(&area);
        let good = World::new(&area).measure().tell(0, |m| frame(m, 1, &KEY));
        let mut rng = Rng::new(seed);
        for _ in 0..20 {
            let mut bad = good.clone();
            // The delimiter itself is followed by another, so that it may be hit too.
            let bit = rng.index(8 * bad.len());
            bad[bit / 8] ^= 1 << (bit % 8);
            let before = node.counts();
            node.receive(&bad);
            node.receive(&[0]);
            prop_assert_eq!(node.counts().accepted, before.accepted, "bit {}", bit);
            prop_assert!(node.counts().refused > before.refused, "bit {bit}");
        }
        node.receive(&good);
        prop_assert_eq!(node.counts().accepted, 1);
    }

    #[test]
    fn frames_may_come_in_pieces_of_any_size(seed in any::<u64>(), piece in 1_usize..70) {
        let area = Area::random(8, seed);
        let mut node = node(&area);
        let good = World::new(&area).measure().tell(0, |m| frame(m, 1, &KEY));
        good.chunks(piece).for_each(|bytes| node.receive(bytes));
        prop_assert_eq!((node.counts().accepted, node.counts().refused), (1, 0));
    }
}

#[test]
fn frames_for_others_and_under_other_keys_are_refused() {
    let area = Area::random(8, 5);
    let mut node = node(&area);
    let snapshot = World::new(&area).measure();
    let before = setpoints(&node);
    for (to, key) in [(2, KEY), (PLANT, KEY), (255, KEY), (1, [8; 32])] {
        node.receive(&snapshot.tell(0, |m| frame(m, to, &key)));
    }
    assert_eq!((node.counts().accepted, node.counts().refused), (0, 4));
    assert_eq!(setpoints(&node), before);
}

#[test]
fn measurements_of_another_area_or_an_earlier_tick_are_refused() {
    let (area, other) = (Area::random(8, 5), Area::random(9, 5));
    let mut node = node(&area);
    node.receive(&World::new(&other).measure().tell(3, |m| frame(m, 1, &KEY)));
    assert_eq!((node.counts().accepted, node.counts().refused), (0, 1));
    for tick in [3, 3, 2] {
        node.receive(&World::new(&area).measure().tell(tick, |m| frame(m, 1, &KEY)));
    }
    assert_eq!((node.counts().accepted, node.counts().refused), (1, 3));
}

#[test]
fn a_node_without_a_charter_says_and_uses_nothing() {
    let mut node = Box::new(Node32::new(Key::new(&KEY), 99));
    let area = Area::random(8, 5);
    node.receive(&World::new(&area).measure().tell(0, |m| frame(m, 0, &KEY)));
    assert_eq!((node.counts().accepted, node.counts().refused), (0, 1));
    node.tick(0, &mut |_, _| panic!("it spoke"));
}

#[test]
fn the_same_bytes_give_the_same_frames() {
    let area = Area::random(12, 6);
    let (mut one, mut other) = (node(&area), node(&area));
    let snapshot = World::new(&area).measure();
    for tick in 0..20 {
        let good = snapshot.tell(tick, |m| frame(m, 1, &KEY));
        one.receive(&good);
        good.chunks(7).for_each(|bytes| other.receive(bytes));
        assert_eq!(orders(&mut one, tick), orders(&mut other, tick));
    }
}
