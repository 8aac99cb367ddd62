//! Writes a finished run down (filled below).

/// Word of a rung.
pub fn rung_word(rung: u8) -> &'static str {
    match rung {
        0 => "keep",
        1 => "lean",
        2 => "stretch",
        _ => "shed",
    }
}

#[cfg(test)]
pub(crate) mod sample;
