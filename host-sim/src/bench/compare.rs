//! Two frames that should be the same, and where they are not.
//!
//! Contract: equality is of bytes. Only when they differ are the frames taken
//! apart, so that the first difference can be shown as tick, message and field.

use super::talk::opened;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::frame::Header;
use hedgerow_protocol::message::{Bits, Floats, Message};
use serde::Serialize;
use std::fmt;

/// The first difference between a board and the steward beside it.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct Difference {
    /// Area whose board it is.
    pub area: String,
    /// Tick of the frame.
    pub tick: u32,
    /// Which frame of the tick, from 0.
    pub frame: usize,
    /// Kind of message, of the board's frame.
    pub message: String,
    /// Field that differs.
    pub field: String,
    /// What the board says.
    pub board: String,
    /// What the steward in this process says.
    pub in_process: String,
}

impl fmt::Display for Difference {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { area, tick, frame, message, field, board, in_process } = self;
        write!(
            f,
            "{area}, tick {tick}, frame {frame} ({message}): {field} is {board} on the board and {in_process} in-process"
        )
    }
}

/// A frame's kind and fields, in words.
#[derive(Clone, Debug, PartialEq, Eq)]
struct Said {
    kind: String,
    fields: Vec<(String, String)>,
}

/// Hold two frames of a tick against each other; none if their bytes are equal.
pub fn compare(
    (area, tick, frame): (&str, u32, usize),
    board: Option<&[u8]>,
    in_process: Option<&[u8]>,
    key: &Key,
) -> Option<Difference> {
    if board == in_process {
        return None;
    }
    let ours = said(in_process, key);
    let theirs = said(board, key);
    let (field, board, in_process) = first(&theirs, &ours);
    Some(Difference {
        area: area.to_owned(),
        tick,
        frame,
        message: theirs.kind,
        field,
        board,
        in_process,
    })
}

fn first(theirs: &Said, ours: &Said) -> (String, String, String) {
    if theirs.kind != ours.kind {
        return ("the message".to_owned(), theirs.kind.clone(), ours.kind.clone());
    }
    let missing = || "missing".to_owned();
    let most = theirs.fields.len().max(ours.fields.len());
    for index in 0..most {
        let (one, other) = (theirs.fields.get(index), ours.fields.get(index));
        if one != other {
            let name = one.or(other).map_or_else(missing, |(name, _)| name.clone());
            let value = |side: Option<&(String, String)>| {
                side.map_or_else(missing, |(_, value)| value.clone())
            };
            return (name, value(one), value(other));
        }
    }
    let code = "its code on the wire".to_owned();
    (code, "other bytes".to_owned(), "other bytes".to_owned())
}

fn said(wire: Option<&[u8]>, key: &Key) -> Said {
    let Some(wire) = wire else {
        return Said { kind: "no frame".to_owned(), fields: Vec::new() };
    };
    let mut raw = wire.to_vec();
    let Some((header, message)) = opened(&mut raw, key) else {
        return Said { kind: "no frame of ours".to_owned(), fields: Vec::new() };
    };
    let (kind, own) = fields(&message);
    let mut all = header_fields(&header);
    all.extend(own);
    Said { kind: kind.to_owned(), fields: all }
}

fn header_fields(header: &Header) -> Vec<(String, String)> {
    vec![
        ("from".to_owned(), header.from.to_string()),
        ("to".to_owned(), header.to.to_string()),
        ("boot_id".to_owned(), header.boot_id.to_string()),
        ("peer_boot_id".to_owned(), header.peer_boot_id.to_string()),
        ("counter".to_owned(), header.counter.to_string()),
    ]
}

/// Kind of a message and its fields; lists by element, numbers so that any two that differ look different.
fn fields(message: &Message<'_>) -> (&'static str, Vec<(String, String)>) {
    let mut out = Fields(Vec::new());
    let kind = match message {
        Message::Orders(orders) => {
            out.put("tick", orders.tick);
            out.floats("setpoint_mw", orders.setpoint_mw);
            out.floats("shed_mw", orders.shed_mw);
            out.bits("take_off", orders.take_off);
            "Orders"
        }
        Message::Status(status) => {
            out.put("tick", status.tick);
            out.put("rung", format!("{:?}", status.rung));
            out.put("verdict", format!("{:?}", status.verdict));
            out.float("proven_mw", status.proven_mw);
            out.float("load_mw", status.load_mw);
            out.float("shed_mw", status.shed_mw);
            out.put("topology", status.topology);
            out.put("ties_open", format!("{:#b}", status.ties_open));
            out.put("feeders_locked", format!("{:#b}", status.feeders_locked));
            out.floats("tie_deviation_mw", status.tie_deviation_mw);
            out.put("accepted", status.accepted);
            out.put("refused", status.refused);
            "Status"
        }
        Message::ProofPart(part) => {
            out.put("proof", part.proof);
            out.put("tick", part.tick);
            out.put("rung", format!("{:?}", part.rung));
            out.put("topology", part.topology);
            out.put("root", part.root);
            out.bits("line_closed", part.line_closed);
            out.bits("tie_closed", part.tie_closed);
            out.float("claimed_mw", part.claimed_mw);
            out.put("vector", format!("{:?}", part.vector));
            out.put("first", part.first);
            out.put("total", part.total);
            out.floats("values", part.values);
            "ProofPart"
        }
        Message::TieTerms(terms) => {
            // Nothing packed in it: its own debug form names every field.
            let text = format!("{terms:?}");
            let inner =
                text.split_once('{').map_or("", |(_, rest)| rest).trim_end_matches([' ', '}']);
            for field in split_top(inner) {
                let (name, value) = field.split_once(':').unwrap_or((field, ""));
                out.put(name.trim(), value.trim());
            }
            "TieTerms"
        }
        other => {
            out.put("content", format!("{other:?}"));
            "start-up message"
        }
    };
    (kind, out.0)
}

/// Split at commas outside of brackets.
fn split_top(text: &str) -> Vec<&str> {
    let (mut depth, mut start, mut out) = (0_i32, 0, Vec::new());
    for (at, c) in text.char_indices() {
        match c {
            '[' | '(' | '{' => depth += 1,
            ']' | ')' | '}' => depth -= 1,
            ',' if depth == 0 => {
                out.push(&text[start..at]);
                start = at + 1;
            }
            _ => {}
        }
    }
    out.push(&text[start..]);
    out
}

struct Fields(Vec<(String, String)>);

impl Fields {
    fn put(&mut self, name: &str, value: impl fmt::Display) {
        self.0.push((name.to_owned(), value.to_string()));
    }

    fn float(&mut self, name: &str, value: f32) {
        // The bits too: 0 and -0, or two NaNs, are different bytes.
        self.put(name, format_args!("{value:?} (0x{:08X})", value.to_bits()));
    }

    fn floats(&mut self, name: &str, values: Floats<'_>) {
        for (index, value) in values.iter().enumerate() {
            self.float(&format!("{name}[{index}]"), value);
        }
    }

    fn bits(&mut self, name: &str, bits: Bits<'_>) {
        self.put(name, format!("{bits:?}"));
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use hedgerow_protocol::auth::REHEARSAL_KEY;
    use hedgerow_protocol::frame::{PLANT, seal};
    use hedgerow_protocol::message::packed::pack_floats;
    use hedgerow_protocol::message::{Orders, Rung, Status, Stop, Verdict};

    fn key() -> Key {
        Key::new(&REHEARSAL_KEY)
    }

    fn sealed(counter: u32, message: &Message<'_>) -> Vec<u8> {
        let header = Header { id: 0, from: 1, to: PLANT, boot_id: 1, peer_boot_id: 1, counter };
        let (mut raw, mut wire) = ([0; 512], [0; 512]);
        seal(&header, message, &key(), &mut raw, &mut wire).unwrap().to_vec()
    }

    fn orders(counter: u32, mw: f32) -> Vec<u8> {
        let mut room = [0; 8];
        let setpoint_mw = pack_floats([1.0, mw].into_iter(), &mut room).unwrap();
        let orders =
            Orders { tick: 9, setpoint_mw, shed_mw: Floats::default(), take_off: Bits::default() };
        sealed(counter, &Message::Orders(orders))
    }

    fn compared(board: Option<&[u8]>, in_process: Option<&[u8]>) -> Option<Difference> {
        compare(("Ashmere", 9, 0), board, in_process, &key())
    }

    #[test]
    fn equal_frames_have_no_difference() {
        let frame = orders(3, 2.0);
        assert_eq!(compared(Some(&frame), Some(&frame)), None);
    }

    #[test]
    fn names_the_field_and_both_values_to_the_last_bit() {
        let (one, other) = (orders(3, 2.0), orders(3, f32::from_bits(0x4000_0001)));
        let found = compared(Some(&one), Some(&other)).unwrap();
        assert_eq!((found.message.as_str(), found.field.as_str()), ("Orders", "setpoint_mw[1]"));
        assert!(found.board.contains("0x40000000") && found.in_process.contains("0x40000001"));
        assert!(found.to_string().starts_with("Ashmere, tick 9, frame 0 (Orders): setpoint_mw[1]"));
    }

    #[test]
    fn tells_minus_zero_from_zero() {
        let status = |proven_mw| {
            let status = Status {
                tick: 9,
                rung: Rung::Keep,
                verdict: Verdict::Blind,
                proven_mw,
                load_mw: 1.0,
                shed_mw: 0.0,
                topology: 0,
                ties_open: 0,
                feeders_locked: 0,
                tie_deviation_mw: Floats::default(),
                accepted: 1,
                refused: 0,
            };
            sealed(3, &Message::Status(status))
        };
        let found = compared(Some(&status(0.0)), Some(&status(-0.0))).unwrap();
        assert_eq!(found.field, "proven_mw");
    }

    #[test]
    fn names_a_header_field() {
        let found = compared(Some(&orders(3, 2.0)), Some(&orders(4, 2.0))).unwrap();
        assert_eq!((found.field.as_str(), found.board.as_str()), ("counter", "3"));
    }

    #[test]
    fn names_another_message_and_a_missing_frame() {
        let (one, stop) = (orders(3, 2.0), sealed(3, &Message::Stop(Stop { tick: 9 })));
        assert_eq!(compared(Some(&one), Some(&stop)).unwrap().field, "the message");
        let found = compared(Some(&one), None).unwrap();
        assert_eq!(found.in_process, "no frame");
    }
}
