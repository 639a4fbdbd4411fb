//! The pictures of a quote: one of the mask, and one of each flagged figure in both fractures.

use std::collections::BTreeMap;
use std::path::Path;

use rayon::prelude::*;

use crate::blur;
use crate::expose::{LevelLine, level_lines, polish};
use crate::geom::Point;
use crate::judge::{Background, Settings, edge_samples};
use crate::mask::{Mask, Standings};
use crate::quote::made::{Made, Scene, fractures_of};
use crate::quote::result::Method;
use crate::quote::{Answer, Clip, Setup, Terms};
use crate::report::figure_plot::{Contour, FigurePicture, PlotError};
use crate::report::overview_plot::{Mark, Overview, OverviewFigure};
use crate::report::stripes_plot::StripesPicture;
use crate::target::Target;
use crate::units::Nm;

use super::CliError;
use super::files::Output;
use super::quote::prefix;

/// What pictures are made of.
pub(super) struct Pictures<'a> {
    pub(super) clips: &'a [Clip<'a>],
    pub(super) terms: &'a Terms<'a>,
}

/// Changes of dose that the picture of a figure shows.
const CHANGES: [(&str, f64); 3] = [
    ("contour as written", 0.0),
    ("at 10 % more dose", 0.1),
    ("at 10 % less dose", -0.1),
];

impl Pictures<'_> {
    /// Draws the stripes, the masks and the first `most` flagged figures, and names the pictures in their flags. Returns those
    /// that show the whole, with what they show.
    pub(super) fn write(
        &self,
        answer: &mut Answer,
        most: usize,
        output: &mut Output,
    ) -> Result<Vec<(String, String)>, CliError> {
        let mut shown = vec![(
            "stripes.png".to_owned(),
            "Time by stripe and cause".to_owned(),
        )];
        let path = output.claim(&shown[0].0)?;
        let names: Vec<&str> = self.clips.iter().map(|clip| clip.chosen.name).collect();
        StripesPicture {
            title: &format!("{}: time by stripe", names.join(", ")),
            stripes: &answer.stripes,
        }
        .png(&path)
        .map_err(|cause| CliError::Picture {
            file: path.display().to_string(),
            cause,
        })?;
        let setup = self.terms.setup().map_err(|cause| CliError::Quote {
            file: self.terms.profile.name().to_owned(),
            cause,
        })?;
        let correction = answer.quote.dose_correction;
        let background = Background {
            ratio: correction.backscatter_ratio,
            density: correction.density,
        };
        let flattening = background.flattening();
        let mut flagged: Vec<(u64, u64)> = Vec::new();
        for flag in &answer.quote.flags {
            let figure = (flag.clip, flag.figure);
            if !flagged.contains(&figure) && flagged.len() < most {
                flagged.push(figure);
            }
        }
        let mut named: BTreeMap<(u64, u64), String> = BTreeMap::new();
        for (index, clip) in self.clips.iter().enumerate() {
            let prefix = prefix(index, self.clips.len());
            let number = index as u64 + 1;
            let name = format!("{prefix}overview.png");
            let path = output.claim(&name)?;
            overview(clip, number, answer, &path)?;
            shown.push((name, format!("Shots per figure of {}", clip.chosen.name)));
            let flagged = flagged.iter().filter(|(clip, _)| *clip == number);
            let flagged: Vec<usize> = flagged
                .filter_map(|&(_, figure)| usize::try_from(figure).ok())
                .collect();
            let standings = Standings::new(clip.mask);
            for method in [Method::Overlap, Method::Tile] {
                let Some(made) = answer.made[index].get(method) else {
                    continue;
                };
                let mut asked = Vec::new();
                for &figure in flagged.iter().filter(|figure| made[**figure].is_ok()) {
                    let name = format!("{prefix}figure-{figure}-{}.png", method.name());
                    asked.push((figure, output.claim(&name)?, name));
                }
                let fractures = fractures_of(made);
                asked.par_iter().try_for_each(|(figure, path, _)| {
                    let Ok(made) = &made[*figure] else {
                        return Ok(());
                    };
                    let scene = Scene::of(clip.mask, &standings, &fractures, *figure, setup.blur);
                    figure_picture(
                        clip.mask,
                        *figure,
                        method,
                        made,
                        &scene,
                        (&setup, flattening),
                        path,
                    )
                    .map_err(|cause| CliError::Picture {
                        file: path.display().to_string(),
                        cause,
                    })
                })?;
                let recommended = answer.quote.recommended == Some(method);
                for (figure, _, name) in asked {
                    let figure = (number, figure as u64);
                    if recommended || !named.contains_key(&figure) {
                        named.insert(figure, name);
                    }
                }
            }
        }
        for flag in &mut answer.quote.flags {
            flag.picture = named.get(&(flag.clip, flag.figure)).cloned();
        }
        Ok(shown)
    }
}

/// The mask of one clip.
fn overview(clip: &Clip<'_>, number: u64, answer: &Answer, path: &Path) -> Result<(), CliError> {
    let Some(extent) = clip.mask.extent else {
        return Ok(());
    };
    let method = answer.quote.recommended.unwrap_or(Method::Overlap);
    let results = answer.figures.iter().filter(|f| f.clip == number);
    let figures: Vec<OverviewFigure<'_>> = clip
        .mask
        .figures
        .iter()
        .zip(results)
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
        .filter(|(_, flag)| flag.clip == number)
        .map(|(i, flag)| Mark {
            number: i + 1,
            place: Point::new(pm(flag.place_nm[0]), pm(flag.place_nm[1])),
        })
        .collect();
    Overview {
        title: &format!("{}: {} fracture", clip.chosen.name, method.name()),
        value_label: "shots per figure",
        figures: &figures,
        marks: &marks,
        extent,
    }
    .png(path)
    .map_err(|cause| CliError::Picture {
        file: path.display().to_string(),
        cause,
    })
}

fn figure_picture(
    mask: &Mask,
    number: usize,
    method: Method,
    made: &Made,
    scene: &Scene,
    (setup, flattening): (&Setup, f64),
    path: &Path,
) -> Result<(), PlotError> {
    let figure = &mask.figures[number].figure;
    let target = Target::new(figure, setup.blur, setup.tolerance);
    let sigma = setup.blur.sigma().0;
    let [x0, y0, x1, y1] = target.bounds();
    let around = 3.0 * sigma;
    let window = [x0 - around, y0 - around, x1 + around, y1 + around];
    let lines = CHANGES.map(|(_, change)| {
        let level = blur::level_at(change, flattening);
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

/// The places of a level line; a closed one ends where it begins.
fn closed(mut line: LevelLine) -> Vec<[f64; 2]> {
    if line.closed {
        line.points.extend(line.points.first().copied());
    }
    line.points
}
