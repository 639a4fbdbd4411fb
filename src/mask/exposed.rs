//! What a cluster of figures exposes: merged, subtracted, biased, toned, cut to the window.

use std::sync::Arc;

use rayon::prelude::*;

use crate::geom::{self, Figure, Rect};

use super::cells::Role;
use super::index::clusters;
use super::resolve::Cluster;

/// How drawn figures become exposed ones.
#[derive(Clone, Copy)]
pub(super) struct Rules {
    /// Drawn edges move outward by this, pm.
    pub(super) growth: i64,
    /// Whether the background is exposed within frames, not the figures.
    pub(super) background: bool,
}

/// The figures a cluster exposes; with a window, what lies in it.
pub(super) fn exposed(cluster: &Cluster, rules: Rules, window: Option<Rect>) -> Vec<Arc<Figure>> {
    let mut figures = merged(&cluster.figures);
    if rules.growth != 0 {
        figures = grown(&figures, rules.growth);
    }
    if rules.background {
        let frames = of_role(&cluster.figures, Role::Frame);
        let background = geom::subtract(&frames, &owned(&figures));
        figures = background.into_iter().map(Arc::new).collect();
    }
    match window {
        Some(window) => figures
            .into_par_iter()
            .flat_map_iter(|f| within(f, window))
            .collect(),
        None => figures,
    }
}

/// The drawn figures without the subtracted ones, block by block: only those whose bounds hang together meet in one boolean.
fn merged(figures: &[(Role, Arc<Figure>)]) -> Vec<Arc<Figure>> {
    let figures: Vec<_> = figures
        .iter()
        .filter(|(role, _)| *role != Role::Frame)
        .collect();
    let boxes: Vec<Rect> = figures.par_iter().map(|(_, f)| f.bounds()).collect();
    let merged = |block: Vec<usize>| match block[..] {
        [single] => match figures[single] {
            (Role::Drawn, figure) => vec![Arc::clone(figure)],
            _ => Vec::new(),
        },
        _ => {
            let block: Vec<(Role, Arc<Figure>)> =
                block.into_iter().map(|i| figures[i].clone()).collect();
            let drawn = of_role(&block, Role::Drawn);
            let subtracted = of_role(&block, Role::Subtracted);
            let merged = match subtracted[..] {
                [] => geom::unite(&drawn),
                _ => geom::subtract(&drawn, &subtracted),
            };
            merged.into_iter().map(Arc::new).collect()
        }
    };
    let blocks = clusters(&boxes, |_, _| true);
    blocks.into_par_iter().flat_map_iter(merged).collect()
}

/// Figures with their edges moved outward, those that may meet together.
fn grown(figures: &[Arc<Figure>], growth: i64) -> Vec<Arc<Figure>> {
    let far = furthest(growth);
    let boxes: Vec<Rect> = figures.par_iter().map(|f| f.bounds().grown(far)).collect();
    let blocks = clusters(&boxes, |_, _| true);
    let grown = |block: Vec<usize>| {
        let block: Vec<Figure> = block.into_iter().map(|i| (*figures[i]).clone()).collect();
        geom::offset_mitred(&block, growth)
            .into_iter()
            .map(Arc::new)
    };
    blocks.into_par_iter().flat_map_iter(grown).collect()
}

/// How far a figure may come to reach beyond its bounds: to the tip of a mitre.
pub(super) fn furthest(growth: i64) -> i64 {
    2 * growth.max(0)
}

fn within(figure: Arc<Figure>, window: Rect) -> Vec<Arc<Figure>> {
    let bounds = figure.bounds();
    if window.contains(bounds.min) && window.contains(bounds.max) {
        return vec![figure];
    }
    if !window.touches(bounds) {
        return Vec::new();
    }
    let cut = geom::intersect(&[(*figure).clone()], &[Figure::from_rect(window)]);
    cut.into_iter().map(Arc::new).collect()
}

fn of_role(figures: &[(Role, Arc<Figure>)], role: Role) -> Vec<Figure> {
    figures
        .iter()
        .filter(|(r, _)| *r == role)
        .map(|(_, f)| (**f).clone())
        .collect()
}

fn owned(figures: &[Arc<Figure>]) -> Vec<Figure> {
    figures.iter().map(|f| (**f).clone()).collect()
}
