//! Fractures curved mask figures into electron-beam shots and says how long they take to write and how true they print.

pub mod blur;
pub mod cli;
pub mod expose;
pub mod fracture;
pub mod geom;
pub mod judge;
pub mod layout;
pub mod mask;
pub mod profile;
pub mod quote;
pub mod report;
pub mod shot;
pub mod target;
pub mod units;
pub mod write_time;
