//! The sweep: static cascades against identities, hand figures, an interior-point
//! solver and the closed loop; sameness of bytes; speed; published trends.

mod closed;
mod identities;
mod optimum;
mod pairs;
mod sameness;
mod speed;
mod trends;
