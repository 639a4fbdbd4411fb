//! Sets of places on a line.

/// Closed intervals in rising order, none touching the next.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Intervals(Vec<(i64, i64)>);

impl Intervals {
    /// The union of intervals in any order.
    pub(super) fn new(mut intervals: Vec<(i64, i64)>) -> Self {
        intervals.sort_unstable();
        intervals.dedup_by(|next, last| {
            let joins = next.0 <= last.1;
            if joins {
                last.1 = last.1.max(next.1);
            }
            joins
        });
        Self(intervals)
    }

    pub(super) fn as_slice(&self) -> &[(i64, i64)] {
        &self.0
    }

    pub(super) fn unite(&mut self, other: Self) {
        let mut all = std::mem::take(&mut self.0);
        all.extend(other.0);
        *self = Self::new(all);
    }

    /// Takes the inside of `other` away.
    pub(super) fn subtract(&mut self, other: &Self) {
        let mut left = Vec::with_capacity(self.0.len() + other.0.len());
        let mut cuts = other.0.iter().peekable();
        for &(mut from, to) in &self.0 {
            while cuts.next_if(|c| c.1 <= from).is_some() {}
            while let Some(cut) = cuts.peek().filter(|c| c.0 < to) {
                if cut.0 > from {
                    left.push((from, cut.0));
                }
                from = cut.1;
                if from >= to {
                    break;
                }
                cuts.next();
            }
            if from < to {
                left.push((from, to));
            }
        }
        self.0 = left;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn union_joins_and_difference_splits() {
        let mut set = Intervals::new(vec![(5, 9), (0, 3), (3, 4)]);
        assert_eq!(set.as_slice(), [(0, 4), (5, 9)]);
        set.subtract(&Intervals::new(vec![(-1, 1), (2, 3), (4, 6), (8, 20)]));
        assert_eq!(set.as_slice(), [(1, 2), (3, 4), (6, 8)]);
        set.unite(Intervals::new(vec![(2, 3)]));
        assert_eq!(set.as_slice(), [(1, 4), (6, 8)]);
    }
}
