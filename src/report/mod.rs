//! Numbers into files, plots and text for people. Only this room writes result files.
pub mod compare_json;
pub mod compare_text;
pub mod explain;
pub mod figures;
pub mod fingerprint;
pub mod folder;
pub mod frame_json;
pub mod heading;
pub mod number;
pub mod plots;
pub mod result_json;
pub mod summary;
pub mod traces_csv;
pub mod write;
