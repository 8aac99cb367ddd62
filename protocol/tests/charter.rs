//! The charter example of `WIRE.md`, byte by byte, and what its reader refuses.

mod page;

use hedgerow_protocol::auth::digest16;
use hedgerow_protocol::charter::{self, CharterReader, CharterWriter};
use hedgerow_protocol::message::Refusal;
use page::{examples, hex};

/// The header of the page's charter.
const fn header() -> charter::Header<'static> {
    charter::Header {
        format: charter::CHARTER_FORMAT,
        address: 1,
        name: "Ashmere",
        base_mva: 100.0,
        nominal_hz: 50.0,
        buses: 2,
        lines: 1,
        ties: 1,
        units: 1,
        feeders: 1,
        meters: 1,
        settings: charter::Settings {
            tick_s: 0.1,
            iterations: 400,
            shadow_iterations: 400,
            filter_gain: 0.2,
            envelope_keep: 0.9,
            freeze_ticks: 20,
            damping_pu_per_hz: 0.01,
            lowest_rung: 3,
            tie_band: 0.3,
            angle_band: 0.25,
            tie_price: 1.0,
            tie_curvature: 0.5,
            agreement_penalty: 2.0,
            agreement_relax: 0.75,
            settle_ticks: 50,
            help_hops: 1,
            neighbour_ticks: 30,
            proof_threshold: 0.005,
            proof_ticks: 5,
            persist_ticks: 10,
            climb_ticks: 100,
            climb_margin: 0.05,
            climb_tolerance: 0.002,
            dual_clamp: 1000.0,
            return_ramp: 0.01,
            return_free_hz: -0.05,
        },
    }
}

/// The charter of the page: two buses, one of everything else.
fn write_charter(writer: &mut CharterWriter<'_>) -> Result<(), Refusal> {
    writer.put(&header())?;
    writer.put(&charter::Line {
        from: 0,
        to: 1,
        susceptance: 10.0,
        rating: 1.5,
        metered: true,
        closed: true,
    })?;
    writer.put(&charter::Tie {
        number: 300,
        bus: 1,
        neighbour: 2,
        reactance: 0.25,
        rating: 1.0,
        schedule: -0.5,
        angle: 0.125,
        from_end: true,
        meshed: false,
        closed: true,
    })?;
    writer.put(&charter::Unit {
        bus: 0,
        available: true,
        storage: false,
        base: 0.5,
        low: 0.25,
        high: 0.75,
        emergency_low: 0.125,
        emergency_high: 0.875,
        cost: 1.0,
        ramp: 0.0625,
        droop_pu_per_hz: 2.0,
    })?;
    writer.put(&charter::Feeder {
        bus: 1,
        load: 0.125,
        price: 100.0,
        curvature: 0.5,
        switched: true,
        automatic: false,
    })?;
    writer.put(&charter::Meter { bus: 0, weight: 1.0 })?;
    writer.put(&0.1f32)
}

#[test]
fn charter_bytes_and_hash_are_those_of_the_page() {
    let page = examples();
    let mut buffer = [0; 512];
    let mut writer = CharterWriter::new(&mut buffer);
    write_charter(&mut writer).unwrap();
    let bytes = writer.finish().unwrap();
    assert_eq!(hex(bytes), hex(&page["Charter"]["bytes"]));
    assert_eq!(hex(&digest16(bytes)), hex(&page["Charter"]["hash"]));
}

#[test]
fn charter_of_the_page_reads_to_its_end_and_refuses_any_flipped_bit() {
    let mut bytes = examples()["Charter"]["bytes"].clone();
    let (header, mut reader) = CharterReader::open(&bytes).unwrap();
    assert_eq!((header.name, header.settings.help_hops), ("Ashmere", 1));
    reader.take::<charter::Line>().unwrap();
    assert_eq!(reader.take::<charter::Tie>().unwrap().number, 300);
    reader.take::<charter::Unit>().unwrap();
    reader.take::<charter::Feeder>().unwrap();
    reader.take::<charter::Meter>().unwrap();
    assert_eq!(reader.take_finite(), Ok(0.1));
    assert!(reader.is_done());
    for bit in 0..bytes.len() * 8 {
        bytes[bit / 8] ^= 1 << (bit % 8);
        assert_eq!(CharterReader::open(&bytes).err(), Some(Refusal::Checksum));
        bytes[bit / 8] ^= 1 << (bit % 8);
    }
}
