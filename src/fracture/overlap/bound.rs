//! How few shots can print a figure: a bound from below that holds for every shot list.
//!
//! # Bound
//! Let a list of shots of dose 1, sides within the limits, print the figure within tolerance. Write `F_s(p)` for the dose of shot
//! `s` at `p`, let `p` run over any places that must print, and let `d_p = ½ − context` be the dose needed there.
//!
//! 1. *Every shot is admissible*: alone it stays below ½ at each place that must not print, as doses add and none is negative.
//! 2. *Shares*: with `a_s(p) = min(1, F_s(p)/d_p)` the shots have `Σ_s a_s(p) ≥ 1`. Either some shot gives `d_p` alone, and its
//!    share is 1; or no share is cut off, and the sum is that of the doses over `d_p`. (Cutting off matters: a shot gives up to
//!    twice what is needed, and the bound would be halved.)
//! 3. *Weights*: if `u_p ≥ 0` and `Σ_p u_p·a_s(p) ≤ 1` for every admissible shot, then
//!    `Σ_p u_p ≤ Σ_p u_p Σ_s a_s(p) = Σ_s Σ_p u_p a_s(p) ≤ Σ_s 1`, the number of shots. This is the dual of the linear cover program.
//!
//! # Finitely many shots stand for all
//! Lay lines across both axes, the outermost at ±∞. Shrink an admissible shot to the lines it holds (to one line if it holds none): as
//! a smaller shot gives less everywhere, the result is admissible too, and so lies in a largest admissible rectangle of lines.
//! The shot lies in that rectangle moved out by one line on all sides, its *hull*, and its shares are no greater than the hull's.
//! So step 3 need hold for the hulls only. Finer lines make tighter hulls and a better bound; every choice is valid.
//!
//! # Windows
//! Long figures are bounded in windows more than a greatest side and twice [`FAR`] apart. No shot comes within `FAR` of
//! two of them, and one further off gives less than 7e-16 there. So the shots that count for one window count for no other.
//!
//! Departing from cover programs as in Heinrich-Litan and Lübbecke, ACM JEA 11 (2007), rectangles are not cells covered or not, but
//! shares of a blurred dose.

mod hulls;
mod packing;

use crate::blur::{Blur, THRESHOLD};
use crate::shot::ShotLimits;
use crate::target::{Need, Target};

use hulls::{Places, hulls};
use packing::{weights, whole};

/// Distance between places that must print, along the rim, σ.
const PRINT_STEP: f64 = 0.7;

/// Distance between places that must not print, along the rim, σ.
const CLEAR_STEP: f64 = 0.3;

/// A place that needs less than this from the shots, its context giving the rest, is left out.
const LEAST_NEED: f64 = 0.05;

/// Greatest side of a window, σ.
const WINDOW: f64 = 64.0;

/// A shot further off than this many σ gives nothing: `Φ(−8) = 6.2e-16`.
const FAR: f64 = 8.0;

/// The least number of shots of dose 1 that can print a figure within tolerance, as far as it can be proved; 0 if nothing must print.
///
/// `context` is the dose (at least 0) that other figures give at a place, nm. How the proof goes: see the head of this module.
pub(in crate::fracture) fn lower_bound(
    target: &Target,
    blur: Blur,
    limits: &ShotLimits,
    context: impl Fn([f64; 2]) -> f64,
) -> usize {
    windows(target, blur, limits, context)
        .iter()
        .filter(|places| !places.print.is_empty())
        .map(|places| whole(weights(&hulls(places, limits)).iter().sum()).max(1))
        .sum()
}

/// The places of a figure that count, window by window.
fn windows(
    target: &Target,
    blur: Blur,
    limits: &ShotLimits,
    context: impl Fn([f64; 2]) -> f64,
) -> Vec<Places> {
    let sigma = blur.sigma().0;
    let [x0, y0, x1, y1] = target.bounds();
    let side = WINDOW * sigma;
    let pitch = side + limits.greatest_side.0 + 2.0 * FAR * sigma;
    let starts = |from: f64, to: f64| {
        let mut starts = vec![from];
        while let Some(next) = starts.last().map(|s| s + pitch).filter(|&s| s < to) {
            starts.push(next);
        }
        starts
    };
    let (columns, rows) = (starts(x0, x1), starts(y0, y1));
    let mut windows: Vec<Places> = rows
        .iter()
        .flat_map(|&low| columns.iter().map(move |&left| (left, low)))
        .map(|(left, low)| Places {
            sigma,
            bounds: [left, low, x1.min(left + side), y1.min(low + side)],
            print: Vec::new(),
            clear: Vec::new(),
        })
        .collect();
    let within = |p: [f64; 2], [x0, y0, x1, y1]: [f64; 4], margin: f64| {
        (x0 - margin..=x1 + margin).contains(&p[0]) && (y0 - margin..=y1 + margin).contains(&p[1])
    };
    let index = |v: f64, from: f64, count: usize| {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a float to integer cast saturates; clamped to the windows"
        )]
        let i = ((v - from) / pitch) as usize;
        i.min(count - 1)
    };
    // The rim comes edge by edge, on finely drawn curves denser than asked for, so it is thinned by distance.
    let mut last: [Option<[f64; 2]>; 2] = [None, None];
    let beyond = 1e-4 * sigma + 1e-6 * target.tolerance();
    target.rim(CLEAR_STEP * sigma, beyond, |p, need| {
        let (last, step) = match need {
            Need::Print => (&mut last[0], PRINT_STEP),
            _ => (&mut last[1], CLEAR_STEP),
        };
        if last.is_some_and(|q| (q[0] - p[0]).hypot(q[1] - p[1]) < 0.9 * step * sigma) {
            return;
        }
        *last = Some(p);
        let at = index(p[1], y0, rows.len()) * columns.len() + index(p[0], x0, columns.len());
        let window = &mut windows[at];
        if need == Need::Clear && within(p, window.bounds, 3.0 * sigma) {
            window.clear.push(p);
        } else if need == Need::Print && within(p, window.bounds, 0.0) {
            let needed = THRESHOLD - context(p);
            if needed >= LEAST_NEED {
                window.print.push((p, needed));
            }
        }
    });
    for window in &mut windows {
        window.clear.sort_by(|p, q| p[0].total_cmp(&q[0]));
    }
    windows
}

#[cfg(test)]
mod tests;
