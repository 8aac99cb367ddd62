//! The sweep: static cascades against identities, hand figures, an interior-point
//! solver and the closed loop; sameness of bytes; speed; published trends.

mod identities;
mod optimum;
mod speed;
