//! The pictures of a quote: one of the mask, and one of each flagged figure in both fractures.

use std::collections::BTreeMap;
use std::path::Path;

use rayon::prelude::*;

use crate::expose::{LevelLine, level_at, level_lines, polish};
use crate::fracture::{Fracture, FractureError};
use crate::geom::Point;
use crate::judge::{Settings, edge_samples};
use crate::mask::{Mask, Standings};
use crate::quote::made::{Made, Scene};
use crate::quote::result::Method;
use crate::quote::{Answer, Setup, Terms};
use crate::report::figure_plot::{Contour, FigurePicture, PlotError};
use crate::report::overview_plot::{Mark, Overview, OverviewFigure};
use crate::target::Target;
use crate::units::Nm;

use super::CliError;

/// What pictures are made of.
pub(super) struct Pictures<'a> {
    pub(super) mask: &'a Mask,
    pub(super) terms: &'a Terms<'a>,
    pub(super) directory: &'a Path,
}

/// Changes of dose that the picture of a figure shows.
const CHANGES: [(&str, f64); 3] = [
    ("contour as written", 0.0),
    ("at 10 % more dose", 0.1),
    ("at 10 % less dose", -0.1),
];

impl Pictures<'_> {
    /// Draws the mask and the first `most` flagged figures, and names the pictures in their flags.
    pub(super) fn write(&self, answer: &mut Answer, most: usize) -> Result<(), CliError> {
        self.overview(answer)?;
        let setup = self.terms.setup().map_err(|cause| CliError::Quote {
            file: self.terms.profile.name().to_owned(),
            cause,
        })?;
        let mut flagged: Vec<usize> = Vec::new();
        for flag in &answer.quote.flags {
            let figure = usize::try_from(flag.figure).unwrap_or(usize::MAX);
            if !flagged.contains(&figure) && flagged.len() < most {
                flagged.push(figure);
            }
        }
        let standings = Standings::new(self.mask);
        let mut named: BTreeMap<usize, String> = BTreeMap::new();
        for method in [Method::Overlap, Method::Tile] {
            let Some(made) = answer.made.get(method) else {
                continue;
            };
            let fractures: Vec<Result<Fracture, FractureError>> = made
                .iter()
                .map(|made| {
                    made.as_ref()
                        .map(|m| m.fracture.clone())
                        .map_err(Clone::clone)
                })
                .collect();
            let drawn: Vec<Option<(usize, String)>> = flagged
                .par_iter()
                .map(|&figure| {
                    let Ok(made) = &made[figure] else {
                        return Ok(None);
                    };
                    let name = format!("figure-{figure}-{}.png", method.name());
                    let scene = Scene::of(self.mask, &standings, &fractures, figure, setup.blur);
                    let path = self.directory.join(&name);
                    self.figure(figure, method, made, &scene, &setup, &path)
                        .map_err(|cause| CliError::Picture {
                            file: path.display().to_string(),
                            cause,
                        })?;
                    Ok(Some((figure, name)))
                })
                .collect::<Result<_, CliError>>()?;
            let recommended = answer.quote.recommended == Some(method);
            for (figure, name) in drawn.into_iter().flatten() {
                if recommended || !named.contains_key(&figure) {
                    named.insert(figure, name);
                }
            }
        }
        for flag in &mut answer.quote.flags {
            let figure = usize::try_from(flag.figure).unwrap_or(usize::MAX);
            flag.picture = named.get(&figure).cloned();
        }
        Ok(())
    }

    fn overview(&self, answer: &Answer) -> Result<(), CliError> {
        let Some(extent) = self.mask.extent else {
            return Ok(());
        };
        let method = answer.quote.recommended.unwrap_or(Method::Overlap);
        let figures: Vec<OverviewFigure<'_>> = self
            .mask
            .figures
            .iter()
            .zip(&answer.figures)
            .map(|(distinct, result)| OverviewFigure {
                figure: &distinct.figure,
                places: distinct
                    .places
                    .iter()
                    .map(|place| (place.transform, &place.repetition))
                    .collect(),
                value: result.fractures.get(method).map(|f| f.shots as f64),
            })
            .collect();
        let pm = |v: f64| Nm(v).to_pm().unwrap_or_default();
        let marks: Vec<Mark> = answer
            .quote
            .flags
            .iter()
            .enumerate()
            .map(|(i, flag)| Mark {
                number: i + 1,
                place: Point::new(pm(flag.place_nm[0]), pm(flag.place_nm[1])),
            })
            .collect();
        let path = self.directory.join("overview.png");
        Overview {
            title: &format!("{}: {} fracture", answer.quote.source.name, method.name()),
            value_label: "shots per figure",
            figures: &figures,
            marks: &marks,
            extent,
        }
        .png(&path)
        .map_err(|cause| CliError::Picture {
            file: path.display().to_string(),
            cause,
        })
    }

    fn figure(
        &self,
        number: usize,
        method: Method,
        made: &Made,
        scene: &Scene,
        setup: &Setup,
        path: &Path,
    ) -> Result<(), PlotError> {
        let figure = &self.mask.figures[number].figure;
        let target = Target::new(figure, setup.blur, setup.tolerance);
        let sigma = setup.blur.sigma().0;
        let [x0, y0, x1, y1] = target.bounds();
        let around = 3.0 * sigma;
        let window = [x0 - around, y0 - around, x1 + around, y1 + around];
        let lines = CHANGES.map(|(_, change)| {
            let level = level_at(change);
            let mut lines = level_lines(&scene.dose, window, 0.25 * sigma, level);
            polish(&scene.dose, &mut lines, level, sigma);
            lines.into_iter().map(closed).collect::<Vec<_>>()
        });
        let contours: Vec<Contour<'_>> = CHANGES
            .iter()
            .zip(&lines)
            .map(|((label, _), lines)| Contour { label, lines })
            .collect();
        let settings = Settings::new(setup.blur, setup.tolerance);
        let mut along = 0.0;
        let edge_error: Vec<(f64, Option<f64>)> = edge_samples(&target, &scene.dose, &settings)
            .map(|sample| {
                let length = sample.length_pm as f64 * 1e-3;
                along += length;
                (along - 0.5 * length, sample.error.map(|e| e.0))
            })
            .collect();
        let title = format!(
            "figure {number}, {} fracture: {} shots, {}",
            method.name(),
            made.fracture.shots.len(),
            if made.fidelity.prints_within_tolerance() {
                "prints within tolerance"
            } else {
                "does not print within tolerance"
            }
        );
        FigurePicture {
            title: &title,
            figure,
            target: &target,
            context: &scene.neighbours,
            shots: &made.fracture.shots,
            contours: &contours,
            edge_error: &edge_error,
        }
        .png(path)
    }
}

/// The places of a level line; a closed one ends where it begins.
fn closed(mut line: LevelLine) -> Vec<[f64; 2]> {
    if line.closed {
        line.points.extend(line.points.first().copied());
    }
    line.points
}
