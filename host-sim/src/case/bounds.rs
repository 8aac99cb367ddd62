//! The values a number of a file may have, and how a reader is told.
//!
//! Contract: `nan` lies in no bounds; infinity only where the file may say `inf`.

use std::fmt;

/// The values a number may have.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Bounds {
    least: f64,
    most: f64,
    above: bool,
    endless: bool,
}

impl Bounds {
    /// From `least` to `most`, both included.
    pub const fn within(least: f64, most: f64) -> Self {
        Self { least, most, above: false, endless: false }
    }

    /// Above `least`, up to `most`.
    pub const fn above(least: f64, most: f64) -> Self {
        Self { least, most, above: true, endless: false }
    }

    /// The same, or `inf`.
    pub const fn or_endless(mut self) -> Self {
        self.endless = true;
        self
    }

    /// Whether a value is one of them; `nan` never is.
    pub fn hold(self, value: f64) -> bool {
        let low = if self.above { value > self.least } else { value >= self.least };
        (low && value <= self.most) || (self.endless && value == f64::INFINITY)
    }
}

impl fmt::Display for Bounds {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.above {
            write!(out, "above {} and up to {}", self.least, self.most)?;
        } else {
            write!(out, "from {} to {}", self.least, self.most)?;
        }
        if self.endless {
            out.write_str(", or inf")?;
        }
        Ok(())
    }
}
