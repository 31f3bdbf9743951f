//! Many points of one config, computed by all cores, kept in a store that survives being killed, and arranged as a table.
//!
//! Comes in: a [`Document`](crate::config::document::Document) with a `scan:` section. Leaves: rows of final numbers, in the units
//! of their columns (SI), each point at its place in the grid; where they lie is kept in files of frames with sums. What a row
//! holds depends on the config alone: never on threads, parts, or how often the scan was stopped.
//!
//! | file | what it does |
//! |---|---|
//! | `grid.rs` | which values the axes have at a point |
//! | `setup.rs` | columns of the table; a plan for every structure |
//! | `bundled.rs` | eight points at a time, where they fit |
//! | `lanes.rs` | with which instructions, as asked for or as begun |
//! | `evaluate.rs` | one point computed |
//! | `row.rs` | a computed point and its bytes |
//! | `store.rs` | the file of one part: frames, damage, locks |
//! | `shelf.rs` | all files together, rows in the order of the points |
//! | `changed.rs` | what has changed in a config since its store was begun |
//! | `bits.rs` | a set of points |
//! | `order.rs` | which points a part has, and in which order |
//! | `begin.rs` | the head of a store, and the order of the points |
//! | `engine.rs` | threads, writing, stopping |
//! | `follow.rs` | levels followed along an axis, through crossings |
//! | `summary.rs` | counts, errors, extremes, the best point |
//! | `cluster.rs` | scripts for a queue |
//! | `limit.rs` | threads and time that a queue grants |

pub mod begin;
pub mod bits;
pub mod bundled;
pub mod changed;
pub mod cluster;
pub mod engine;
pub mod evaluate;
pub mod follow;
pub mod grid;
pub mod lanes;
pub mod limit;
pub mod order;
pub mod row;
pub mod setup;
pub mod shelf;
pub mod store;
pub mod summary;
