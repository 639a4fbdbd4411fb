//! Where doses pile up.

use super::DoseField;

/// Places of a box (least x, least y, greatest x, greatest y; nm) where the dose has a maximum above `least`, with that maximum.
///
/// Looked for on a lattice of `step` nm, each maximum of the lattice refined by the parabolas through its neighbours along
/// both axes. At a step of σ/8 that is right to 1e-4 of the dose: the fourth derivative of `Φ(x/σ)` along an axis is at most
/// 1.4/σ⁴, and an eighth of it goes with `(step/2)⁴`. Cost: the doses of the lattice.
#[must_use]
pub fn peaks(
    field: &dyn DoseField,
    [x0, y0, x1, y1]: [f64; 4],
    step: f64,
    least: f64,
) -> Vec<([f64; 2], f64)> {
    let count = |length: f64| super::index(length / step) + 4;
    let (columns, rows) = (count(x1 - x0), count(y1 - y0));
    #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
    let at = |from: f64, i: usize| from + (i as f64 - 1.0) * step;
    let mut found = Vec::new();
    // The row before, the row looked at, and the one after.
    let mut band = [const { Vec::new() }; 3].map(|row: Vec<f64>| {
        let mut row = row;
        row.resize(columns, 0.0);
        row
    });
    for j in 0..rows {
        band.rotate_left(1);
        field.row(at(y0, j), at(x0, 0), step, &mut band[2]);
        if j < 2 {
            continue;
        }
        let [below, here, above] = &band;
        for i in 1..columns - 1 {
            let v = here[i];
            let around = [here[i - 1], here[i + 1], below[i], above[i]];
            // On a plateau the first along both axes stands for it.
            if v < around[0] || v < around[2] || v < around[1] || v < around[3] {
                continue;
            }
            let rise = |a: f64, b: f64| {
                let bend = 2.0 * v - a - b;
                if bend > 1e-12 {
                    (b - a).powi(2) / (8.0 * bend)
                } else {
                    0.0
                }
            };
            let peak = v + rise(around[0], around[1]) + rise(around[2], around[3]);
            if peak > least {
                found.push(([at(x0, i), at(y0, j - 1)], peak));
            }
        }
    }
    found
}
