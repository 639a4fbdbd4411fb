//! Fractures curved mask figures into electron-beam shots and says how long they take to write and how true they print.

pub mod fracture;
pub mod geom;
pub mod layout;
pub mod mask;
pub mod profile;
pub mod shot;
pub mod units;
pub mod write_time;
