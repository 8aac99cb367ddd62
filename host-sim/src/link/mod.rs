//! (filled by its author)
