//! The table as plain text, and the JSON document.
//!
//! Contract: no line wider than 100 characters but reasons; a figure that was not
//! measured says so and is no number.

use super::{AreaFit, CoreFit, Fit, Spread};
use std::fmt::Write as _;

/// Stands where a figure would.
pub const NOT_MEASURED: &str = "not measured";

/// The table.
pub fn text(fit: &Fit) -> String {
    let mut out = format!("Fit of {}: every figure from an image built and run now\n", fit.grid);
    for core in &fit.cores {
        write_core(&mut out, fit, core);
    }
    for line in assumptions(fit) {
        let _ = writeln!(out, "{line}");
    }
    out
}

/// The JSON document, ending with a newline.
pub fn json(fit: &Fit) -> String {
    serde_json::to_string_pretty(fit).unwrap_or_default() + "\n"
}

/// What the figures rest on, in sentences.
pub fn assumptions(fit: &Fit) -> Vec<String> {
    vec![
        format!(
            "Share of the tick: the longest tick's instructions at {} cycles each (an assumption: the",
            fit.cycles_per_instruction
        ),
        "  emulator counts instructions, not cycles; caches and wait states are not in it), at the core's".to_owned(),
        format!("  clock, in a tick of {} s. Rebuild: a tick with a new topology, rung or set of open ties, or a proof.", fit.tick_s),
        format!(
            "Share of the link: the busier direction's busiest tick at {:.0} bit/s, ten bits a byte.",
            fit.baud
        ),
        format!(
            "Largest area, for {:.0} KiB flash and {:.0} KiB RAM: measured static RAM, moved by the sizes of",
            fit.flash_kib, fit.ram_kib
        ),
        format!(
            "  the steward's tables ({} lines and {:.2} unknowns a bus), and the deepest stack with {:.0} % room.",
            super::growth::LINES_PER_BUS,
            super::growth::UNKNOWNS_PER_BUS,
            100.0 * super::growth::STACK_MARGIN
        ),
    ]
}

fn write_core(out: &mut String, fit: &Fit, core: &CoreFit) {
    let _ = writeln!(out, "\n{} at {} MHz", core.name, core.mhz);
    match &core.image {
        None => {
            let _ = writeln!(out, "  image         {NOT_MEASURED}");
        }
        Some(image) => {
            let _ = writeln!(
                out,
                "  flash         {:>8} bytes: text {}, constants {}, initial values {}",
                image.flash_bytes(),
                image.text_bytes,
                image.rodata_bytes,
                image.data_bytes
            );
            let _ = writeln!(
                out,
                "  static RAM    {:>8} bytes, of which the steward {}",
                image.static_ram_bytes(),
                image.steward_bytes
            );
        }
    }
    if let Some(holds) = core.holds {
        let _ = writeln!(
            out,
            "  holds         {:>8} buses, {} unknowns, {} rows",
            holds.buses, holds.unknowns, holds.rows
        );
    }
    if !core.areas.is_empty() {
        let _ = writeln!(
            out,
            "  {:<14}{:>25}{:>12}{:>8}{:>13}{:>13}{:>8}",
            "area",
            "insns min/med/max",
            "rebuild max",
            "tick",
            "stack/left",
            "bytes in/out",
            "link"
        );
    }
    for area in &core.areas {
        write_area(out, area);
    }
    let _ = match &core.largest {
        None => writeln!(out, "  largest area  {NOT_MEASURED}"),
        Some(largest) => writeln!(
            out,
            "  largest area  {:>8} buses on {:.0} KiB flash and {:.0} KiB RAM (ended by {})",
            largest.buses, fit.flash_kib, fit.ram_kib, largest.ended_by
        ),
    };
    if let Some(why) = &core.not_measured {
        let _ = writeln!(out, "  {NOT_MEASURED}: {why}");
    }
}

fn write_area(out: &mut String, area: &AreaFit) {
    let three = |s: Option<Spread>| {
        s.map_or(NOT_MEASURED.to_owned(), |s| format!("{}/{}/{}", s.min, s.median, s.max))
    };
    let most = |s: Option<Spread>| s.map_or("-".to_owned(), |s| s.max.to_string());
    let percent =
        |share: Option<f64>| share.map_or("-".to_owned(), |s| format!("{:.1} %", 100.0 * s));
    let number = |n: Option<u64>| n.map_or("-".to_owned(), |n| n.to_string());
    let _ = writeln!(
        out,
        "  {:<14}{:>25}{:>12}{:>8}{:>13}{:>13}{:>8}",
        area.area,
        three(area.instructions),
        most(area.rebuild_instructions),
        percent(area.tick_share),
        format!("{}/{}", number(area.stack_bytes), number(area.stack_left_bytes)),
        format!("{}/{}", most(area.heard_bytes), most(area.said_bytes)),
        percent(area.link_share),
    );
}
