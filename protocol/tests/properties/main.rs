//! What holds for every message, every frame and every stream of bytes.

mod frames;
mod parts;
mod payloads;
mod streams;
