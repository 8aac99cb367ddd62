//! (filled)
