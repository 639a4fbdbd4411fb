//! Layout → mask against areas by hand, a second boolean engine, and laws that must hold for every layout.

mod common;
mod contexts;
mod hierarchy;
mod laws;
mod layers;
mod options;
mod repair;
mod second_engine;
