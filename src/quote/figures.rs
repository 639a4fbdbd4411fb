//! Every distinct figure of a quote on a line of its own.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::exposure::Exposed;
use super::made::{self, MadeMask};
use super::result::{self, ByMethod, FigureFracture, FigureResult, Flag, FlagKind, Method};
use super::{Clip, fingerprint, summary};

/// What is known of figures.
pub(super) struct Evidence<'a> {
    pub(super) clips: &'a [Clip<'a>],
    /// By clip.
    pub(super) made: &'a [ByMethod<Arc<MadeMask>>],
    /// By clip and figure.
    pub(super) seconds: &'a [ByMethod<Vec<Option<f64>>>],
    /// By clip.
    pub(super) exposed: &'a ByMethod<Vec<Exposed<'a>>>,
    pub(super) flags: &'a [Flag],
}

/// A line for each, clip by clip in the order of the mask.
pub(super) fn results(evidence: &Evidence<'_>) -> Vec<FigureResult> {
    let mut flags: BTreeMap<(u64, u64), Vec<FlagKind>> = BTreeMap::new();
    for flag in evidence.flags {
        flags
            .entry((flag.clip, flag.figure))
            .or_default()
            .push(flag.kind);
    }
    let mut results = Vec::new();
    for (clip, of_clip) in evidence.clips.iter().enumerate() {
        for figure in 0..of_clip.mask.figures.len() {
            let raised = flags.remove(&(clip as u64 + 1, figure as u64));
            results.push(FigureResult {
                flags: raised.unwrap_or_default(),
                ..evidence.result(clip, figure)
            });
        }
    }
    results
}

impl Evidence<'_> {
    /// Clip and figure from 0; flags are left to be filled in.
    fn result(&self, clip: usize, figure: usize) -> FigureResult {
        let distinct = &self.clips[clip].mask.figures[figure];
        let mut fractures = ByMethod::default();
        for method in Method::ALL {
            *fractures.slot(method) = self.fracture(clip, figure, method);
        }
        let corner = made::first_place(distinct)
            .apply_rect(distinct.figure.bounds())
            .min;
        FigureResult {
            clip: clip as u64 + 1,
            figure: figure as u64,
            place_nm: corner.to_nm(),
            fingerprint: fingerprint::of(&distinct.figure),
            places: result::Count(distinct.place_count()),
            outline_nm: distinct.figure.outline_nm(),
            vertices: distinct.figure.vertices() as u64,
            rectilinear: distinct.figure.is_rectilinear(),
            fractures,
            flags: Vec::new(),
        }
    }

    /// `None` where it was not made.
    fn fracture(&self, clip: usize, figure: usize, method: Method) -> Option<FigureFracture> {
        let made = self.made[clip].get(method)?.get(figure)?.as_ref().ok()?;
        let scores = made.fidelity.summary();
        let seconds = self.seconds[clip].get(method);
        let dose = self
            .exposed
            .get(method)
            .and_then(|all| all.get(clip)?.mean_dose(figure));
        Some(FigureFracture {
            shots: made.fracture.shots.len() as u64,
            edge_error_nm: summary::edge_error(&scores),
            prints_within_tolerance: Some(scores.prints_within_tolerance),
            scores: Some(scores),
            mean_dose: dose.map(|dose| dose.0),
            seconds: seconds.and_then(|all| all.get(figure).copied().flatten()),
        })
    }
}
