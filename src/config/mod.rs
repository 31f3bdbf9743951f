//! Text in, a checked [`Document`](document::Document) out, with a place on every value.
pub mod compare;
pub mod document;
pub mod drives;
pub mod envelopes;
pub mod expression;
pub mod matrix;
pub mod messages;
pub mod npy;
pub mod place;
pub mod reader;
pub mod record;
pub mod sequence;
pub mod settings;
pub mod state;
pub mod system;
pub mod tape;
pub mod tree;
