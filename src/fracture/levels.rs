//! The doses that a shot may have.

use crate::units::Dose;

/// Up to eight doses, ascending.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DoseLevels {
    count: usize,
    levels: [f64; MOST],
}

/// Most levels.
const MOST: usize = 8;

/// Least and greatest level: with less than half of dose-to-size a shot prints nothing.
const RANGE: [f64; 2] = [0.5, 2.0];

/// Levels that no fracture can use.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum DoseLevelsError {
    /// None, or too many.
    #[error("{found} dose levels, expected 1 to {MOST}")]
    Count {
        /// How many.
        found: usize,
    },
    /// Too low, too high, or no number.
    #[error("dose level {found}, expected {} to {}, a multiple of dose-to-size", RANGE[0], RANGE[1])]
    Level {
        /// The level.
        found: f64,
    },
    /// The same twice.
    #[error("dose level {found} twice, expected each once")]
    Twice {
        /// The level.
        found: f64,
    },
}

impl Default for DoseLevels {
    fn default() -> Self {
        Self::ONE
    }
}

impl DoseLevels {
    /// Dose 1 for every shot.
    pub const ONE: Self = Self {
        count: 1,
        levels: [1.0; MOST],
    };

    /// From levels in any order.
    ///
    /// # Errors
    /// When there are none or more than eight, one is outside 0.5 to 2, or one comes twice.
    pub fn new(doses: &[Dose]) -> Result<Self, DoseLevelsError> {
        let count = doses.len();
        if !(1..=MOST).contains(&count) {
            return Err(DoseLevelsError::Count { found: count });
        }
        let mut levels = [0.0; MOST];
        for (level, dose) in levels.iter_mut().zip(doses) {
            if !(RANGE[0]..=RANGE[1]).contains(&dose.0) {
                return Err(DoseLevelsError::Level { found: dose.0 });
            }
            *level = dose.0;
        }
        levels[..count].sort_by(f64::total_cmp);
        let twice = levels[..count].windows(2).find(|pair| pair[0] == pair[1]);
        if let Some(pair) = twice {
            return Err(DoseLevelsError::Twice { found: pair[0] });
        }
        Ok(Self { count, levels })
    }

    /// The levels, ascending.
    pub fn iter(&self) -> impl Iterator<Item = f64> + use<> {
        self.levels.into_iter().take(self.count)
    }

    /// Whether there is a choice.
    #[must_use]
    pub fn several(&self) -> bool {
        self.count > 1
    }

    /// Whether every shot gets dose 1.
    #[must_use]
    pub fn are_one(&self) -> bool {
        self.count == 1 && self.levels[0] == 1.0
    }

    /// The level nearest to dose 1, the higher of two.
    #[must_use]
    pub fn nearest_to_one(&self) -> f64 {
        self.iter().fold(f64::INFINITY, |best, level| {
            if (level - 1.0).abs() <= (best - 1.0).abs() {
                level
            } else {
                best
            }
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn levels_are_sorted_and_checked() {
        let levels =
            |doses: &[f64]| DoseLevels::new(&doses.iter().map(|&d| Dose(d)).collect::<Vec<_>>());
        let three = levels(&[1.2, 0.8, 1.0]).unwrap();
        assert_eq!(three.iter().collect::<Vec<_>>(), [0.8, 1.0, 1.2]);
        assert_eq!(three.nearest_to_one(), 1.0);
        assert_eq!(levels(&[0.75, 1.25]).unwrap().nearest_to_one(), 1.25);
        assert_eq!(levels(&[]), Err(DoseLevelsError::Count { found: 0 }));
        assert_eq!(levels(&[1.0; 9]), Err(DoseLevelsError::Count { found: 9 }));
        assert_eq!(levels(&[0.4]), Err(DoseLevelsError::Level { found: 0.4 }));
        assert_eq!(
            levels(&[1.0, 0.8, 1.0]),
            Err(DoseLevelsError::Twice { found: 1.0 })
        );
        assert!(levels(&[f64::NAN]).is_err());
        assert!(levels(&[1.0]).unwrap().are_one() && DoseLevels::ONE.are_one());
    }
}
