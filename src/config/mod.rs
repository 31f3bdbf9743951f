//! Text in, a checked [`Document`](document::Document) out, with a place on every value.
pub mod expression;
pub mod messages;
pub mod matrix;
pub mod npy;
pub mod place;
pub mod reader;
pub mod system;
pub mod tape;
pub mod tree;
