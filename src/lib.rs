//! Fractures curved mask figures into electron-beam shots and says how long they take to write and how true they print.
//!
//! # The job
//!
//! Before a mask shop takes an order it must say how many hours a variable-shaped-beam writer will need for a layout whose
//! figures are curved, whether those hours fit the slot on the writer, whether to order non-overlapping or overlapping
//! shots, and which figures to send back. [`quote::quote`] answers with evidence: shot counts, printed contour against the
//! drawn outline, dose margin, hours by cause.
//!
//! # The flow
//!
//! ```text
//!  file ─layout▶ Layout ─mask▶ Mask ─fracture▶ ShotList ─expose▶ dose, contour ─judge▶ Fidelity ─┐
//!                               │ each distinct figure once,   └────write_time▶ WriteTime ───────┼▶ Quote ─report▶
//!                               └ with its context and places ───────▲ (places, density) ────────┘
//! ```
//!
//! Stages take nouns and give nouns, and none imports another; [`quote`] alone knows their order. [`judge`] sees the drawn
//! figure and a dose, never how shots were chosen, so it cannot favour a fracturer.
//!
//! # The words
//!
//! | word | meaning |
//! |---|---|
//! | layout | what a file holds: cells, placements, repetitions, layers |
//! | mask | the figures of the chosen layers at mask scale, merged |
//! | figure | one connected region with its holes; a *ring* is one of its boundary loops |
//! | context | the other figures near enough to matter to a figure's dose (within 5 σ) |
//! | shot | one axis-parallel rectangle flashed with one dose; a *sliver* is one whose short side is under a limit |
//! | tile, overlap | a fracture whose shots do not overlap; one whose shots may, their doses adding |
//! | staircase | the rectilinear outline that stands in for a curved one |
//! | dose | a multiple of dose-to-size, at which a wide edge prints where drawn; *base dose* is µC/cm² at dose 1 |
//! | blur | the short-range Gaussian, always given as its standard deviation σ |
//! | contour | the level line of the dose at ½ |
//! | edge error | signed distance from drawn edge to contour along the outward normal; + is too large |
//! | margin | how far the contour moves for 1 % of dose, nm/% |
//! | slot | the hours the writer is booked for |
//! | stripe, sub-field | band of the mask written in one stage travel; what the fast deflector reaches |
//! | profile | a named set of writer and process numbers |
//!
//! # The units
//!
//! Lengths are at mask scale. [`geom`] counts whole picometres; everything that computes with the blur uses nanometres as
//! `f64`, and [`units`] holds the only conversion factors. Times are seconds inside and hours in results.
//!
//! # The modules, in the order of the flow
//!
//! Nouns: [`units`], [`number`], [`geom`], [`shot`], [`blur`], [`target`], [`profile`]. Stages: [`layout`], [`mask`], [`fracture`], [`expose`],
//! [`judge`], [`write_time`]. The join: [`quote`]. Showing: [`report`], [`cli`].

pub mod units;

pub mod number;

pub mod geom;

pub mod shot;

pub mod blur;

pub mod target;

pub mod profile;

pub mod layout;

pub mod mask;

pub mod fracture;

pub mod expose;

pub mod judge;

pub mod write_time;

pub mod quote;

pub mod report;

pub mod cli;
