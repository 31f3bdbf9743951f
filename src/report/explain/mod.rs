//! What a config means, for a reviewer: `facts` gathers the numbers as plain data; `json` writes them for programs, `text` as
//! a page for people, with `drives`, `noise`, `frame`, `surroundings` and `timetable` for its larger sections, `words` for what is
//! no number, and `page` for the layout.
mod drives;
pub mod facts;
mod frame;
pub mod json;
mod noise;
mod page;
mod surroundings;
pub mod text;
mod timetable;
mod words;
