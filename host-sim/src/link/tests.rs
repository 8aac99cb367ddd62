use super::random::{Rng, happens, share, stream, up_to};
use super::*;
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame::{self, Header};
use hedgerow_protocol::limits::WIRE_MAX;
use hedgerow_protocol::message::{Message, Stop};

/// Send frame `tick` at each tick and note what arrives at each: (tick, frames).
fn carried(link: &mut impl Link, ticks: u32) -> Vec<(u32, Vec<u32>)> {
    (0..ticks)
        .map(|tick| {
            link.send(tick, &tick.to_le_bytes());
            let mut heard = Vec::new();
            link.receive(tick, &mut |wire| {
                heard.push(u32::from_le_bytes(wire.try_into().expect("four bytes")));
            });
            (tick, heard)
        })
        .collect()
}

fn frames(carried: &[(u32, Vec<u32>)]) -> Vec<u32> {
    carried.iter().flat_map(|(_, heard)| heard.clone()).collect()
}

fn link(faults: Links) -> Counted<Faulty<Direct>> {
    in_process(&faults, 1, "Ashmere > Brackwater")
}

#[test]
fn direct_hands_over_in_the_same_tick_or_at_the_next_asking() {
    let mut link = Direct::default();
    link.send(0, b"a");
    link.send(0, b"bc");
    let mut heard = Vec::new();
    link.receive(1, &mut |wire| heard.push(wire.to_vec()));
    assert_eq!(heard, [b"a".to_vec(), b"bc".to_vec()]);
    link.receive(1, &mut |_| panic!("nothing is left"));
    assert!(carried(&mut link, 9).iter().all(|(tick, heard)| heard == &[*tick]));
}

#[test]
fn faultless_link_passes_everything_at_once_and_in_order() {
    let mut link = link(FAULTLESS);
    let all = carried(&mut link, 200);
    assert!(all.iter().all(|(tick, heard)| heard == &[*tick]));
    let tally = link.tally();
    assert_eq!((tally.sent, tally.delivered, tally.in_flight()), (200, 200, 0));
    assert_eq!((tally.lost, tally.duplicated, tally.corrupted), (0, 0, 0));
}

#[test]
fn delay_alone_is_exact_and_keeps_the_order() {
    let mut link = link(Links { delay_ticks: 7, ..FAULTLESS });
    for (tick, heard) in carried(&mut link, 100) {
        let expected: Vec<u32> = tick.checked_sub(7).into_iter().collect();
        assert_eq!(heard, expected, "tick {tick}");
    }
    assert_eq!(link.tally().in_flight(), 7);
}

#[test]
fn jitter_stays_in_its_range_and_lets_frames_overtake() {
    let mut link = link(Links { delay_ticks: 2, jitter_ticks: 5, ..FAULTLESS });
    let all = carried(&mut link, 2000);
    let mut delays = [0; 8];
    for (tick, heard) in &all {
        for sent in heard {
            delays[(tick - sent) as usize] += 1;
        }
    }
    assert_eq!(delays[..2], [0, 0]);
    // Six equal shares of some 2000 frames: 333 each, standard deviation 17.
    assert!(delays[2..].iter().all(|&count| (250..420).contains(&count)), "{delays:?}");
    assert!(!frames(&all).is_sorted());
}

#[test]
fn overtaken_frames_come_one_tick_later_and_last() {
    let mut link = link(Links { reorder: 0.2, ..FAULTLESS });
    let all = carried(&mut link, 1000);
    let late: usize = all
        .iter()
        .map(|(tick, heard)| {
            assert!(heard.iter().all(|sent| *sent == *tick || sent + 1 == *tick));
            assert!(heard.iter().rev().is_sorted());
            heard.iter().filter(|sent| *sent != tick).count()
        })
        .sum();
    // 200 expected, standard deviation 13.
    assert!((140..260).contains(&late), "{late}");
    assert!(!frames(&all).is_sorted());
}

#[test]
fn loses_and_copies_about_as_many_as_told() {
    let mut link = link(Links { loss: 0.1, duplicate: 0.3, ..FAULTLESS });
    carried(&mut link, 10_000);
    let tally = link.tally();
    // Standard deviations 30 and 43 frames.
    assert!((850..1150).contains(&tally.lost), "{tally:?}");
    assert!((2500..2900).contains(&tally.duplicated), "{tally:?}");
    assert_eq!(tally.delivered, tally.sent + tally.duplicated - tally.lost);
}

#[test]
fn chance_one_is_always_and_chance_zero_never() {
    let mut link = link(Links { loss: 1.0, ..FAULTLESS });
    assert!(frames(&carried(&mut link, 500)).is_empty());
    assert!(happens(1.0, u32::MAX) && happens(f64::MIN_POSITIVE, 0));
    assert!(!happens(0.0, 0));
}

#[test]
fn same_seed_and_name_give_the_same_fate_and_others_another() {
    let faults = Links {
        delay_ticks: 1,
        jitter_ticks: 3,
        loss: 0.2,
        duplicate: 0.1,
        reorder: 0.1,
        ..FAULTLESS
    };
    let fate = |seed, name| carried(&mut in_process(&faults, seed, name), 300);
    assert_eq!(fate(1, "a"), fate(1, "a"));
    assert_ne!(fate(1, "a"), fate(2, "a"));
    assert_ne!(fate(1, "a"), fate(1, "b"));
}

#[test]
fn another_chance_leaves_the_other_fates_as_they_were() {
    let lossy = |duplicate| {
        let mut link = link(Links { loss: 0.3, duplicate, ..FAULTLESS });
        let mut heard = frames(&carried(&mut link, 300));
        heard.dedup();
        heard
    };
    assert_eq!(lossy(0.0), lossy(0.9));
}

#[test]
fn outage_passes_nothing_and_ends() {
    let mut link = link(Links { delay_ticks: 3, ..FAULTLESS });
    link.inner_mut().silence(10..20);
    let all = carried(&mut link, 40);
    assert!(all[10..20].iter().all(|(_, heard)| heard.is_empty()));
    // Due in the outage: sent at 7 to 9. Sent in the outage: 10 to 19.
    let expected: Vec<u32> = (0..7).chain(20..37).collect();
    assert_eq!(frames(&all), expected);
    assert_eq!(link.tally().lost, 13);
}

#[test]
fn hurt_frames_are_refused_and_counted_and_the_others_pass() {
    let key = Key::new(&REHEARSAL_KEY);
    let mut link = link(Links { corrupt: 0.25, ..FAULTLESS });
    let mut decoder = FrameDecoder::<WIRE_MAX>::new();
    let (mut opened, mut arrived) = (Vec::new(), 0);
    for tick in 0..1000 {
        let header = Header { id: 0, from: 1, to: 2, boot_id: 9, peer_boot_id: 8, counter: tick };
        let (mut raw, mut wire) = ([0; 64], [0; 64]);
        let said = Message::Stop(Stop { tick });
        let sent = frame::seal(&header, &said, &key, &mut raw, &mut wire).expect("it fits");
        link.send(tick, sent);
        link.receive(tick, &mut |mut wire| {
            arrived += 1;
            while let Some(raw) = decoder.feed(&mut wire) {
                if let Ok((header, message)) = frame::open(raw, &key) {
                    assert_eq!(message, Message::Stop(Stop { tick: header.counter }));
                    opened.push(header.counter);
                }
            }
        });
    }
    let hurt = link.tally().corrupted;
    // 250 expected, standard deviation 14.
    assert!((190..310).contains(&hurt), "{hurt}");
    assert_eq!(arrived, 1000);
    assert!(opened.is_sorted_by(|a, b| a < b));
    // A flipped delimiter takes the next frame with it: one bit in 41 bytes.
    let refused = 1000 - opened.len() as u64;
    assert!((hurt..hurt + 40).contains(&refused), "{refused} of {hurt}");
}

#[test]
fn trace_shows_what_was_sent_and_what_arrived() {
    let mut seen = Vec::new();
    let faults = Links { delay_ticks: 1, ..FAULTLESS };
    let inner = Faulty::new(Direct::default(), &faults, stream(1, "x"));
    let mut link = Traced::new(inner, |passing: Passing<'_>| {
        seen.push(match passing {
            Passing::Sent { tick, wire } => ("sent", tick, wire[0]),
            Passing::Delivered { tick, wire } => ("delivered", tick, wire[0]),
        });
    });
    carried(&mut link, 2);
    assert_eq!(seen, [("sent", 0, 0), ("sent", 1, 1), ("delivered", 1, 0)]);
}

#[test]
fn boxed_links_count_like_bare_ones() {
    let mut link: Box<dyn Link> = Box::new(link(FAULTLESS));
    carried(&mut link, 5);
    assert_eq!(link.tally().delivered, 5);
}

#[test]
fn streams_are_frozen() {
    // Own values, checked with another implementation of SHA-256 and ChaCha8; a
    // change here changes every rehearsal.
    let mut first = stream(1, "link Ashmere > Brackwater");
    let words = [first.next_u32(), first.next_u32()];
    let mut other = stream(2, "link Ashmere > Brackwater");
    assert_ne!(words[0], other.next_u32());
    assert_eq!(words, [1_250_074_486, 454_452_696]);
}

#[test]
fn numbers_made_of_words_stay_in_their_range() {
    for word in [0, 1, u32::MAX / 2, u32::MAX] {
        assert!(up_to(5, word) <= 5 && up_to(u16::MAX, word) <= u32::from(u16::MAX));
        assert!((0.0..1.0).contains(&share(word)));
        assert_eq!(up_to(0, word), 0);
    }
    assert_eq!((up_to(5, u32::MAX), up_to(u16::MAX, u32::MAX)), (5, 65_535));
}
