//! What a config means, for a reviewer: [`facts`] gathers the numbers, [`json`] and [`text`] write them.
pub mod facts;
pub mod json;
pub mod text;
