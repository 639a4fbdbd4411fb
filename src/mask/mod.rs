//! Layout → mask: chosen layers at mask scale, merged, as distinct figures with their contexts and places.
//!
//! The steps, each in its file: `cells` brings the cells to picometres and makes every polygon sound; `window` leaves away what
//! lies outside; `resolve` finds what interacts within reach and loosens only that; `exposed` merges, subtracts, biases and tones;
//! `distinct` finds contexts and writes each figure one way; `places` joins the hierarchy from the top. Cost follows what the file holds,
//! not how often it is repeated.

mod cells;
mod clip;
mod cut;
mod distinct;
mod error;
mod exposed;
mod index;
mod near;
mod options;
mod outline;
mod places;
mod repair;
mod repeat;
mod resolve;
mod scaling;
mod summary;
mod window;

use std::collections::{BTreeMap, HashMap};
use std::sync::Arc;

use rayon::prelude::*;

use crate::geom::{Figure, Point, Rect, Repetition, Transform};
use crate::layout::Layout;
use crate::shot::AddressUnit;

use distinct::Canonical;
use exposed::Rules;
use outline::Outline;
use places::Standing;
use resolve::{Cluster, Resolved, Resolver};

pub use error::{Defect, LayerCounts, MaskError};
pub use near::Standings;
pub use options::{Expose, MaskOptions};
pub use summary::Summary;

/// Most parts that are looked at one by one, checked before memory is taken: about 200 bytes each.
pub const MAX_PARTS: u128 = 50_000_000;

/// Greatest side of a mask that is fractured, m: the largest plates are under two.
pub const GREATEST_SIDE_M: f64 = 2.0;

/// The figures of the chosen layers, each distinct one once.
#[derive(Clone, Debug)]
pub struct Mask {
    /// Sorted by first place (y, then x), so numbering does not depend on how the layout was built.
    pub figures: Vec<DistinctFigure>,
    /// Around all figures at all places; `None` for an empty mask.
    pub extent: Option<Rect>,
    /// What was repaired, as sentences.
    pub notes: Vec<String>,
}

/// One figure with its context, equal up to the eight orientations and shifts by whole address units, and where it stands.
#[derive(Clone, Debug)]
pub struct DistinctFigure {
    /// In its own frame: the least of the eight orientations, lower-left corner of the bounds within one address unit of (0, 0).
    pub figure: Figure,
    /// Other figures within reach in the same frame, cut to the figure's bounds grown by the reach, sorted.
    pub context: Vec<Figure>,
    /// Where it stands; not empty.
    pub places: Vec<Place>,
}

/// Places of a distinct figure: own frame → mask, perhaps repeated (displacements in mask axes, pm).
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// Own frame to mask.
    pub transform: Transform,
    /// Displacements in mask axes.
    pub repetition: Repetition,
}

impl DistinctFigure {
    /// How often it stands on the mask.
    #[must_use]
    pub fn place_count(&self) -> u128 {
        self.places
            .iter()
            .fold(0, |sum, place| sum.saturating_add(place.repetition.count()))
    }
}

impl DistinctFigure {
    /// Around it at all its places.
    fn extent(&self) -> Option<Rect> {
        let bounds = self.figure.bounds();
        let at = |place: &Place| {
            repeat::add_spans(
                place.transform.apply_rect(bounds),
                repeat::span(&place.repetition)?,
            )
        };
        self.places.iter().filter_map(at).reduce(Rect::hull)
    }
}

impl Mask {
    /// Figures over all places; `u128::MAX` stands for that many or more.
    #[must_use]
    pub fn place_count(&self) -> u128 {
        self.figures
            .iter()
            .fold(0, |sum, figure| sum.saturating_add(figure.place_count()))
    }

    /// Whether a plate can hold it.
    ///
    /// # Errors
    /// [`MaskError::TooLarge`], before hours are spent on a wrong scale.
    pub fn check_size(&self) -> Result<(), MaskError> {
        #[allow(clippy::cast_precision_loss, reason = "a bound")]
        let too_long = |pm: i64| pm as f64 * 1e-12 > GREATEST_SIDE_M;
        match self.extent {
            Some(found) if too_long(found.width()) || too_long(found.height()) => {
                Err(MaskError::TooLarge {
                    found,
                    greatest_m: GREATEST_SIDE_M,
                })
            }
            _ => Ok(()),
        }
    }

    /// Area of all figures at all places, nm².
    #[must_use]
    pub fn area_nm2(&self) -> f64 {
        self.figures
            .iter()
            .map(|f| f.figure.area_nm2() * summary::real(f.place_count()))
            .sum()
    }
}

/// Polygons of each layer as the layout holds them: repetitions counted, each cell once.
#[must_use]
pub fn layer_counts(layout: &Layout) -> LayerCounts {
    cells::layer_counts(layout)
}

/// Makes the mask of a layout.
///
/// Figures nearer to each other than the reach are each other's context; equal figures with equal contexts are one
/// [`DistinctFigure`]. Rounding and repair follow the rules at the top of `scaling` and `repair`: nearest picometre, halves up; non-zero fill.
///
/// # Errors
/// A layer not chosen or not there, numbers out of range, a broken hierarchy, a polygon that needs repair if repairs are refused, or more than
/// [`MAX_PARTS`] repeated parts that come within reach of each other.
pub fn build(layout: &Layout, options: &MaskOptions) -> Result<Mask, MaskError> {
    let (reach, growth) = (options.reach_pm()?, options.growth_pm()?);
    options.check_rectangles()?;
    let rules = Rules {
        growth,
        background: matches!(options.expose, Expose::Background { .. }),
    };
    // Edges at this distance from each other may come to touch, each moving.
    let moved = exposed::furthest(growth);
    let cells::Cells {
        cells,
        mut tops,
        notes,
    } = cells::convert(layout, options)?;
    let name = match &tops[..] {
        [single] => cells::name_of(&cells, single),
        _ => "all top cells".to_owned(),
    };
    if let Some(window) = options.window {
        // A subtracted figure that a shrinking reaches from outside counts too.
        let margin = exposed::furthest(growth.abs());
        tops = window::inside(&cells, tops, window, margin)?;
    }
    let mut resolver = Resolver {
        cells,
        reach: reach + 2 * moved,
    };
    let mut resolved: Vec<Option<Resolved>> = Vec::new();
    let top = resolver.cells.len();
    let whole = tops.iter().map(cells::Item::extent).reduce(Rect::hull);
    let Some(bounds) = whole else {
        return Ok(Mask {
            figures: Vec::new(),
            extent: None,
            notes,
        });
    };
    resolver.cells.push(cells::PmCell {
        name,
        items: tops,
        bounds,
    });
    let mut needed = vec![top];
    while let Some(cell) = needed.pop() {
        resolved.resize_with(resolver.cells.len().max(resolved.len()), || None);
        if resolved[cell].is_some() {
            continue;
        }
        let (name, items) = (
            resolver.cells[cell].name.clone(),
            resolver.cells[cell].items.clone(),
        );
        let taken_apart = resolver.resolve(&name, items)?;
        needed.extend(taken_apart.children.iter().map(|c| c.cell));
        resolved[cell] = Some(taken_apart);
    }
    resolved.resize_with(resolver.cells.len(), || None);
    let name = |cell: usize| resolver.cells[cell].name.clone();
    let standings = places::standings(&resolved, top, name)?;
    let found = resolved
        .par_iter()
        .zip(&standings)
        .enumerate()
        .filter_map(|(cell, (resolved, standings))| Some((cell, resolved.as_ref()?, standings)))
        .flat_map(|(cell, resolved, standings)| {
            let name = &resolver.cells[cell].name;
            let window = options.window.filter(|_| cell == top);
            resolved.clusters.par_iter().map(move |c| {
                // What is repeated keeps clear of the border.
                let window = window.filter(|_| c.repetitions.is_empty());
                placed(
                    exposed::exposed(c, rules, window),
                    c,
                    standings,
                    name,
                    options.address,
                    reach,
                )
            })
        })
        .collect::<Result<Vec<_>, _>>()?;
    let figures = numbered(found.into_iter().flatten());
    Ok(Mask {
        extent: figures
            .iter()
            .filter_map(DistinctFigure::extent)
            .reduce(Rect::hull),
        figures,
        notes,
    })
}

/// The figures of one cluster, each with where it stands.
fn placed(
    figures: Vec<Arc<Figure>>,
    cluster: &Cluster,
    standings: &[Standing],
    cell: &str,
    address: AddressUnit,
    reach: i64,
) -> Result<Vec<(Canonical, Vec<Standing>)>, MaskError> {
    let outlines: Vec<Outline> = figures.into_par_iter().map(Outline::new).collect();
    let near = distinct::neighbours(&outlines, reach);
    // Standings by position of the cell's own axes on the address grid: each such position is a different figure.
    let mut by_phase: BTreeMap<Point, Vec<Standing>> = BTreeMap::new();
    for standing in standings {
        let inner = cluster
            .repetitions
            .iter()
            .map(|r| r.turned(standing.transform));
        let repetitions = inner.chain(standing.repetitions.iter().cloned()).collect();
        for piece in places::on_grid(
            Standing {
                repetitions,
                ..*standing
            },
            address.pm(),
            cell,
        )? {
            let back = piece
                .transform
                .orientation
                .inverse()
                .apply(piece.transform.shift);
            by_phase
                .entry(places::phase(back, address.pm()))
                .or_default()
                .push(piece);
        }
    }
    let mut found = Vec::new();
    for (phase, pieces) in by_phase {
        let distinct = distinct::neighbourhoods(&outlines, &near, phase, address.pm(), reach);
        found.par_extend(distinct.into_par_iter().map(|(neighbourhood, shifts)| {
            let (canonical, ways) = distinct::canonical(&neighbourhood, address.pm(), reach);
            let stand = |shift: Point, piece: &Standing| {
                let shift = Transform {
                    shift: shift - phase,
                    ..Transform::IDENTITY
                };
                let to_mask = shift.then(piece.transform);
                let all = ways.iter().map(|way| way.then(to_mask));
                Standing {
                    transform: all.min().unwrap_or(to_mask),
                    repetitions: piece.repetitions.clone(),
                }
            };
            let standings = shifts
                .iter()
                .flat_map(|&shift| pieces.iter().map(move |piece| stand(shift, piece)));
            (canonical, standings.collect())
        }));
    }
    Ok(found)
}

/// Equal figures joined, sorted by where they first stand (y, then x).
fn numbered(found: impl Iterator<Item = (Canonical, Vec<Standing>)>) -> Vec<DistinctFigure> {
    let mut slots: HashMap<Canonical, usize> = HashMap::new();
    let mut standings: Vec<Vec<Standing>> = Vec::new();
    for (canonical, mut more) in found {
        let slot = *slots.entry(canonical).or_insert(standings.len());
        match standings.get_mut(slot) {
            Some(known) => known.append(&mut more),
            None => standings.push(more),
        }
    }
    let mut by_slot: Vec<(usize, Canonical)> = slots
        .into_iter()
        .map(|(canonical, slot)| (slot, canonical))
        .collect();
    by_slot.sort_unstable_by_key(|(slot, _)| *slot);
    let mut figures: Vec<(Point, DistinctFigure)> = by_slot
        .into_par_iter()
        .zip(standings)
        .map(|((_, Canonical { figure, context }), standings)| {
            let bounds = figure.bounds();
            let first = |place: &Place| {
                let corner = place.transform.apply_rect(bounds).min
                    + places::first_displacement(&place.repetition);
                (corner.y, corner.x)
            };
            let mut places = places::places(standings);
            places.sort_by(|p, q| first(p).cmp(&first(q)).then_with(|| p.cmp(q)));
            let (y, x) = places.first().map(first).unwrap_or_default();
            (
                Point::new(x, y),
                DistinctFigure {
                    figure,
                    context,
                    places,
                },
            )
        })
        .collect();
    figures.par_sort_by(|(p, f), (q, g)| {
        (p.y, p.x, &f.figure, &f.context).cmp(&(q.y, q.x, &g.figure, &g.context))
    });
    figures.into_iter().map(|(_, figure)| figure).collect()
}
