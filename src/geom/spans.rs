//! Stretches of a line, `[from, to]`.

/// The union of stretches in any order, as sorted and disjoint ones; replaces what `out` held.
pub(crate) fn union(mut spans: Vec<[f64; 2]>, out: &mut Vec<[f64; 2]>) {
    spans.sort_by(|a, b| a[0].total_cmp(&b[0]));
    out.clear();
    for span in spans {
        match out.last_mut() {
            Some(last) if span[0] <= last[1] => last[1] = last[1].max(span[1]),
            _ => out.push(span),
        }
    }
}

/// Stretches without what others take from them, all sorted and disjoint; replaces what `out` held.
pub(crate) fn without(spans: &[[f64; 2]], taken: &[[f64; 2]], out: &mut Vec<[f64; 2]>) {
    out.clear();
    let mut next = 0;
    for &[mut from, to] in spans {
        while next < taken.len() && taken[next][1] <= from {
            next += 1;
        }
        for t in taken[next..].iter().take_while(|t| t[0] < to) {
            if t[0] > from {
                out.push([from, t[0]]);
            }
            from = from.max(t[1]);
        }
        if to > from {
            out.push([from, to]);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Against every whole place, asked one by one.
    #[test]
    fn union_and_rest_hold_the_places_they_should() {
        let holds = |spans: &[[f64; 2]], x: f64| spans.iter().any(|s| s[0] < x && x < s[1]);
        let some = [[8.0, 9.0], [1.0, 3.0], [2.0, 5.0], [5.0, 6.0], [12.0, 20.0]];
        let others = [
            [0.0, 2.0],
            [4.0, 4.5],
            [7.0, 13.0],
            [15.0, 16.0],
            [19.0, 25.0],
        ];
        let (mut all, mut rest) = (Vec::new(), Vec::new());
        union(some.to_vec(), &mut all);
        assert_eq!(all, [[1.0, 6.0], [8.0, 9.0], [12.0, 20.0]]);
        without(&all, &others, &mut rest);
        for place in 0..120 {
            let x = 0.25 * f64::from(place) + 0.1;
            assert_eq!(holds(&all, x), holds(&some, x), "{x}");
            let left = holds(&some, x) && !holds(&others, x);
            assert_eq!(holds(&rest, x), left, "{x}");
        }
    }
}
