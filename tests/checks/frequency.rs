//! (its author fills this)
