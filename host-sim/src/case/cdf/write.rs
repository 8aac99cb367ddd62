//! The network as the text of a grid file, with a comment for every rule.
//!
//! Contract: figures are written so that they read back to the same value;
//! labels of the source go into comments, printable characters only.

use std::fmt::Write as _;

use super::convert::{Network, NetworkUnit};

/// Write a grid file.
pub(super) fn write(network: &Network) -> String {
    let mut out = String::from(
        "# Imported from an IEEE Common Data Format file. What was changed or added:\n",
    );
    for rule in &network.rules {
        let _ = writeln!(out, "# - {}", printable(rule));
    }
    let _ = writeln!(out, "\nformat = 1\n\n[grid]\nname = \"{}\"", name(&network.title));
    let _ = writeln!(out, "base_mva = {:?}", network.base_mva);
    // The format states no frequency; the systems published in it are North American.
    let _ = writeln!(out, "nominal_hz = 60.0");
    for area in &network.areas {
        let _ = writeln!(out, "\n[[area]]\nname = \"{area}\"");
    }
    for bus in &network.buses {
        let label = printable(&bus.label);
        let remark = if label.is_empty() { label } else { format!("# {label}\n") };
        let _ = writeln!(out, "\n{remark}[[bus]]\nname = \"{}\"", bus.name);
        let _ = writeln!(out, "area = \"{}\"", bus.area);
        if bus.load_mw > 0.0 {
            let _ = writeln!(out, "load_mw = {:?}", bus.load_mw);
        }
    }
    for line in &network.lines {
        let end = |index: usize| network.buses[index].name.as_str();
        let _ = writeln!(out, "\n[[line]]\nname = \"{}\"", line.name);
        let _ = writeln!(out, "from = \"{}\"\nto = \"{}\"", end(line.from), end(line.to));
        let _ = writeln!(
            out,
            "reactance_pu = {:?}\nrating_mw = {:?}",
            line.reactance_pu, line.rating_mw
        );
    }
    for unit in &network.units {
        write_unit(&mut out, unit);
    }
    out
}

fn write_unit(out: &mut String, unit: &NetworkUnit) {
    let _ = writeln!(out, "\n[[unit]]\nname = \"{}\"\nbus = \"{}\"", unit.name, unit.bus);
    let base_mw = unit.base_mw;
    if unit.fixed {
        let _ = writeln!(out, "kind = \"solar\"\nstatus = \"fixed\"");
        let _ = writeln!(out, "base_mw = {base_mw:?}\nmax_mw = {base_mw:?}");
        return;
    }
    let _ = writeln!(out, "kind = \"gas\"\nbase_mw = {base_mw:?}");
    let _ = writeln!(
        out,
        "min_mw = {:?}\nmax_mw = {:?}",
        rounded(0.5 * base_mw),
        rounded(1.2 * base_mw).max(base_mw)
    );
    let _ = writeln!(
        out,
        "emergency_min_mw = {:?}\nemergency_max_mw = {:?}",
        rounded(0.35 * base_mw),
        rounded(1.3 * base_mw).max(base_mw)
    );
}

/// Rounded down to a thousandth of a megawatt.
fn rounded(value_mw: f64) -> f64 {
    (value_mw * 1000.0).floor() / 1000.0
}

/// A name without what a name or a quoted text may not hold.
fn name(title: &str) -> String {
    let clean: String = title
        .chars()
        .filter(|c| (' '..='~').contains(c) && !"\"\\".contains(*c))
        .take(40)
        .collect();
    let clean = clean.trim();
    if clean.is_empty() { "Imported grid".to_owned() } else { clean.to_owned() }
}

/// A comment of one line.
fn printable(text: &str) -> String {
    text.chars().filter(|c| (' '..='~').contains(c)).collect()
}
