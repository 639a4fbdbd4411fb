//! How true a dose prints a drawn figure. It sees the figure and the dose, never how the shots were chosen.

mod narrowest;
mod pieces;
mod samples;
mod spread;

use serde::{Deserialize, Serialize, Serializer};

use crate::blur::{self, Blur, REACH, THRESHOLD};
use crate::geom::Figure;
use crate::target::{Need, Printed, ShotErrors, Target, Violation};
use crate::units::{Dose, Nm};

pub use narrowest::Narrowest;
pub use pieces::Pieces;
pub use samples::{EdgeSample, edge_samples};
pub use spread::Spread;

/// Changes of all doses at which contours are looked for besides the one as written.
pub const CHANGES: [f64; 4] = [-0.10, -0.05, 0.05, 0.10];

/// How to judge.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// The blur: it sets the spacing of samples and the corner zones.
    pub blur: Blur,
    /// How far the contour may be from the outline.
    pub tolerance: Nm,
    /// What lies under the short range; it flattens the dose and so widens the margin.
    pub background: Background,
    /// Writer errors for the error budget; `None` leaves it out.
    pub errors: Option<ShotErrors>,
}

/// Long-range exposure under a figure, after dose correction.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Background {
    /// Backscatter ratio η; 0 for the forward part alone.
    pub ratio: f64,
    /// Coverage U around the figure, spread over the long range; what it is after correction need not lie within 0 to 1.
    pub density: f64,
}

impl Background {
    /// Under a figure that a correction gave the dose `dose`: the density for which `D = (1 + η)/(1 + 2ηU)`.
    #[must_use]
    pub fn of_dose(ratio: f64, dose: Dose) -> Self {
        if ratio == 0.0 {
            return Self::default();
        }
        Self {
            ratio,
            density: ((1.0 + ratio) / dose.0 - 1.0) / (2.0 * ratio),
        }
    }

    /// By how much it divides the relative slope of an edge: `1 + 2ηU`, which is `(1 + η)/D`.
    #[must_use]
    pub fn flattening(self) -> f64 {
        1.0 + 2.0 * self.ratio * self.density
    }
}

impl Settings {
    /// The forward part alone, no error budget.
    #[must_use]
    pub fn new(blur: Blur, tolerance: Nm) -> Self {
        Self {
            blur,
            tolerance,
            background: Background::default(),
            errors: None,
        }
    }

    /// Levels of the contours at [`CHANGES`].
    fn levels(&self) -> [f64; CHANGES.len()] {
        CHANGES.map(|change| blur::level_at(change, self.background.flattening()))
    }

    /// Places along the rim of the tolerance are at most this far apart (nm): between them a contour bends under 0.01 nm.
    fn rim_step(&self) -> f64 {
        (self.blur.sigma().0 / 10.0).min(1.0)
    }

    /// Pitch of the lattice over the whole neighbourhood, nm.
    fn lattice_step(&self) -> f64 {
        self.blur.sigma().0 / 4.0
    }
}

/// Scores of one figure, or of many together: by length of outline, each place counted.
///
/// Everything that is added up over samples is a whole number, so any order gives the same result.
#[derive(Clone, Debug, PartialEq)]
pub struct Fidelity {
    /// Outline away from drawn corners.
    pub edges: Zone,
    /// Outline within 2 σ of a drawn corner, judged by the wider tolerance there.
    pub corners: Zone,
    /// Outline away from drawn corners, by the contours at [`CHANGES`] of the dose.
    pub through_dose: [Zone; CHANGES.len()],
    /// The narrowest place; of many figures, the one of them that is furthest from its drawn width.
    pub narrowest: Option<Narrowest>,
    /// Movement of the contour for 1 % of dose, nm; small is good. All measured places, corners too.
    pub margin: Spread,
    /// Standard deviation of the contour under the writer errors given, nm; empty when none were.
    pub edge_sd: Spread,
    /// Places found that break the rule.
    pub violations: u128,
    /// The gravest of them for one figure, at most 32: furthest from the threshold first. Empty once figures are put together.
    pub worst_violations: Vec<Violation>,
    /// Figures whose pieces or holes are not as drawn.
    pub pieces: Pieces,
    /// Area that prints, nm².
    pub printed_area_nm2: f64,
    /// Area drawn, nm².
    pub drawn_area_nm2: f64,
    /// Figures judged, each place counted.
    pub figures: u128,
}

/// Edge errors over a part of the outline. Lengths in pm.
#[derive(Clone, Debug, PartialEq)]
pub struct Zone {
    /// Edge error where there is a contour in range, nm, + is too large.
    pub error: Spread,
    /// All outline of this part.
    pub length: u128,
    /// Of it, out of tolerance, unmeasured included.
    pub out_of_tolerance: u128,
    /// Of it, without a contour in range.
    pub unmeasured: u128,
}

/// Judges what a dose prints of a figure.
///
/// `context` holds the other figures nearby (for what may print there) and may be cut off at the reach of the blur, and
/// the dose includes theirs. With context the neighbourhood judged is the figure's bounds and 5 σ around them; shots
/// elsewhere are the caller's to find. Without context it is 3 σ around all that is flashed, up to 20 σ away; more is
/// reported in [`Pieces::beyond`].
#[must_use]
pub fn judge(
    figure: &Figure,
    context: &[Figure],
    print: &impl Printed,
    settings: &Settings,
) -> Fidelity {
    let target = Target::new(figure, settings.blur, settings.tolerance);
    let others: Vec<Target> = context
        .iter()
        .map(|f| Target::new(f, settings.blur, settings.tolerance))
        .collect();
    let sigma = settings.blur.sigma().0;
    let overshoot = match print.extent() {
        Some(e) if context.is_empty() => {
            let b = target.bounds();
            (b[0] - e[0])
                .max(b[1] - e[1])
                .max(e[2] - b[2])
                .max(e[3] - b[3])
                .max(0.0)
        }
        _ => 0.0,
    };
    let around = if context.is_empty() {
        overshoot.min(20.0 * sigma) + 3.0 * sigma
    } else {
        REACH * sigma
    };

    let mut violations = target.violations(
        print,
        settings.rim_step(),
        settings.lattice_step(),
        around,
        0.0,
    );
    // What a neighbour needs or may do there is judged with the neighbour.
    violations
        .retain(|v| v.need == Need::Print || others.iter().all(|o| o.need(v.place) == Need::Clear));
    let found = pieces::find(
        &target,
        figure.holes().len(),
        &others,
        print,
        settings.lattice_step(),
        around,
    );
    let mut fidelity = Fidelity {
        violations: violations.len() as u128,
        pieces: Pieces {
            beyond: u128::from(overshoot > 20.0 * sigma),
            ..found.pieces
        },
        printed_area_nm2: found.area_nm2,
        drawn_area_nm2: figure.area_nm2(),
        figures: 1,
        narrowest: narrowest::find(&target, print, settings.blur),
        ..Fidelity::default()
    };
    for sample in edge_samples(&target, print, settings) {
        fidelity.add(&sample, &target);
    }
    violations.sort_by(|a, b| {
        (b.dose - THRESHOLD)
            .abs()
            .total_cmp(&(a.dose - THRESHOLD).abs())
    });
    violations.truncate(32);
    fidelity.worst_violations = violations;
    fidelity
}

impl Default for Fidelity {
    /// Of no figure: everything unmeasured.
    fn default() -> Self {
        Self {
            edges: Zone::default(),
            corners: Zone::default(),
            through_dose: std::array::from_fn(|_| Zone::default()),
            narrowest: None,
            margin: Spread::new(0.0001),
            edge_sd: Spread::new(0.0001),
            violations: 0,
            worst_violations: Vec::new(),
            pieces: Pieces::default(),
            printed_area_nm2: 0.0,
            drawn_area_nm2: 0.0,
            figures: 0,
        }
    }
}

impl Default for Zone {
    fn default() -> Self {
        Self {
            error: Spread::new(0.01),
            length: 0,
            out_of_tolerance: 0,
            unmeasured: 0,
        }
    }
}

impl Zone {
    fn add(&mut self, error: Option<Nm>, tolerance: f64, weight: u128) {
        self.length += weight;
        match error {
            Some(e) => self.error.add(e.0, weight),
            None => self.unmeasured += weight,
        }
        // A thousandth of the accuracy of the contour: an error equal to the tolerance passes.
        if error.is_none_or(|e| e.0.abs() > tolerance + 1e-5) {
            self.out_of_tolerance += weight;
        }
    }

    fn merge(&mut self, other: &Self, places: u128) {
        self.error.merge(&other.error, places);
        self.length += other.length * places;
        self.out_of_tolerance += other.out_of_tolerance * places;
        self.unmeasured += other.unmeasured * places;
    }
}

impl Fidelity {
    fn add(&mut self, sample: &EdgeSample, target: &Target) {
        let weight = u128::from(sample.length_pm);
        if sample.corner {
            let tolerance = target.corner_tolerance();
            self.corners.add(sample.error, tolerance, weight);
        } else {
            let tolerance = target.tolerance();
            self.edges.add(sample.error, tolerance, weight);
            for (zone, error) in self.through_dose.iter_mut().zip(sample.through_dose) {
                zone.add(error, tolerance, weight);
            }
        }
        if let Some(m) = sample.margin {
            self.margin.add(m.0, weight);
        }
        if let Some(sd) = sample.sd {
            self.edge_sd.add(sd.total().0, weight);
        }
    }

    /// Puts another score in, counted for so many places.
    pub fn merge(&mut self, other: &Self, places: u64) {
        self.merge_flattened(other, places, 1.0);
    }

    /// As [`Fidelity::merge`] for places where the background flattens the dose by so much more than where it was judged: margins grow.
    pub fn merge_flattened(&mut self, other: &Self, places: u64, flattening: f64) {
        let n = u128::from(places);
        self.edges.merge(&other.edges, n);
        self.corners.merge(&other.corners, n);
        for (own, other) in self.through_dose.iter_mut().zip(&other.through_dose) {
            own.merge(other, n);
        }
        self.narrowest = match (self.narrowest, other.narrowest) {
            (Some(own), Some(other)) => Some(own.worse(other)),
            (own, other) => own.or(other),
        }
        .map(Narrowest::anywhere);
        self.margin.merge_scaled(&other.margin, n, flattening);
        self.edge_sd.merge(&other.edge_sd, n);
        self.violations += other.violations * n;
        self.worst_violations.clear();
        self.pieces.merge(&other.pieces, n);
        #[allow(
            clippy::cast_precision_loss,
            reason = "a number of places is far below 2^53"
        )]
        let factor = places as f64;
        self.printed_area_nm2 += other.printed_area_nm2 * factor;
        self.drawn_area_nm2 += other.drawn_area_nm2 * factor;
        self.figures += other.figures * n;
    }

    /// Whether every place further than the tolerance from the outline is on the right side of the threshold, and the
    /// pieces and holes are those drawn.
    #[must_use]
    pub fn prints_within_tolerance(&self) -> bool {
        self.violations == 0 && self.pieces == Pieces::default()
    }

    /// The numbers that reports show.
    #[must_use]
    pub fn summary(&self) -> Summary {
        let length = self.edges.length + self.corners.length;
        let share = |part: u128| spread::share(part, length);
        Summary {
            edge_error_nm: EdgeError::of(&self.edges.error),
            corner_error_nm: EdgeError::of(&self.corners.error),
            out_of_tolerance_share: share(
                self.edges.out_of_tolerance + self.corners.out_of_tolerance,
            ),
            unmeasured_share: share(self.edges.unmeasured + self.corners.unmeasured),
            prints_within_tolerance: self.prints_within_tolerance(),
            violations: self.violations,
            pieces: self.pieces,
            through_dose: std::array::from_fn(|i| ThroughDose {
                change_pct: 100.0 * CHANGES[i],
                edge_error_nm: EdgeError::of(&self.through_dose[i].error),
                out_of_tolerance_share: spread::share(
                    self.through_dose[i].out_of_tolerance,
                    self.through_dose[i].length,
                ),
                unmeasured_share: spread::share(
                    self.through_dose[i].unmeasured,
                    self.through_dose[i].length,
                ),
            }),
            narrowest: self.narrowest,
            margin_nm_per_pct: Quantiles::of(&self.margin),
            edge_sd_nm: Quantiles::of(&self.edge_sd),
            printed_area_nm2: self.printed_area_nm2,
            drawn_area_nm2: self.drawn_area_nm2,
        }
    }
}

impl Serialize for Fidelity {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        self.summary().serialize(serializer)
    }
}

/// The numbers that reports show. `None` (null in JSON) where nothing was measured.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Summary {
    /// Away from drawn corners.
    pub edge_error_nm: EdgeError,
    /// Within 2 σ of drawn corners.
    pub corner_error_nm: EdgeError,
    /// Share of the outline out of its tolerance, unmeasured places included.
    pub out_of_tolerance_share: Option<f64>,
    /// Share of the outline with no contour in range.
    pub unmeasured_share: Option<f64>,
    /// Every place further than the tolerance from the outline is right, and so are pieces and holes.
    pub prints_within_tolerance: bool,
    /// Places found that are not.
    pub violations: u128,
    /// Figures whose pieces or holes are not.
    pub pieces: Pieces,
    /// Away from drawn corners, when all doses change.
    pub through_dose: [ThroughDose; CHANGES.len()],
    /// Width at the narrowest place, drawn and printed.
    pub narrowest: Option<Narrowest>,
    /// Movement of the contour for 1 % of dose.
    pub margin_nm_per_pct: Quantiles,
    /// Standard deviation of the contour under the writer errors given.
    pub edge_sd_nm: Quantiles,
    /// Area that prints.
    pub printed_area_nm2: f64,
    /// Area drawn.
    pub drawn_area_nm2: f64,
}

/// Contours when all doses change by a share.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct ThroughDose {
    /// The change, %.
    pub change_pct: f64,
    /// From the drawn outline, away from drawn corners.
    pub edge_error_nm: EdgeError,
    /// Share of that outline out of tolerance, unmeasured places included.
    pub out_of_tolerance_share: Option<f64>,
    /// Share of it with no contour in range.
    pub unmeasured_share: Option<f64>,
}

/// Edge error by length of outline, nm.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct EdgeError {
    /// Signed, + is too large.
    pub mean: Option<f64>,
    /// 95 % of the outline is nearer, by magnitude (to 0.01 nm).
    pub p95: Option<f64>,
    /// The greatest magnitude.
    pub worst: Option<f64>,
}

impl EdgeError {
    fn of(spread: &Spread) -> Self {
        Self {
            mean: spread.mean(),
            p95: spread.magnitude(0.95),
            worst: spread.worst(),
        }
    }
}

/// How a positive quantity is spread over the outline.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Quantiles {
    /// Half of the outline is below.
    pub median: Option<f64>,
    /// 95 % of it is below: the worst 5 % begin here.
    pub p95: Option<f64>,
    /// The greatest.
    pub worst: Option<f64>,
}

impl Quantiles {
    fn of(spread: &Spread) -> Self {
        Self {
            median: spread.magnitude(0.5),
            p95: spread.magnitude(0.95),
            worst: spread.worst(),
        }
    }
}
