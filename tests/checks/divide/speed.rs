//! How long a division takes on a grid of two thousand buses.

use std::time::Instant;

use hedgerow::case::parse_grid;
use hedgerow::case::synthetic::synthetic;
use hedgerow::divide::figures::document;
use hedgerow::divide::{Settings, divide, file, page};

#[test]
fn two_thousand_buses_in_eight_areas_take_less_than_ten_seconds() {
    for (seed, areas) in [(1, None), (2, None), (3, Some(8))] {
        let text = synthetic(2000, 8, seed).unwrap();
        let begun = Instant::now();
        let grid = parse_grid(&text, "made-up").unwrap_or_else(|problems| panic!("{problems}"));
        let settings = Settings { areas, ..Settings::default() };
        let division = divide(&grid, &settings, &mut |_| true).unwrap();
        let shown = document(&division);
        let written = file::divided_text(&text, &division).unwrap();
        let page = page::page(&division, &shown);
        let took_s = begun.elapsed().as_secs_f64();
        println!("seed {seed}: {took_s:.2} s, {}", shown.certainty);
        assert!(took_s < 10.0, "{took_s} s");
        assert!(written.len() > text.len() && page.len() > 10_000);
        assert_eq!(division.price.closed.len(), 7);
    }
}
