//! Unit tests of the division.
