//! The quote: what a mask costs to write and how true it prints, with verdict and flags.

pub mod result;

pub use result::Quote;
