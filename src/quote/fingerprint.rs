//! One short name for equal figures, in whatever layout they stand.

use crate::geom::Figure;

/// FNV-1a, 64 bits, of all coordinates in the figure's own frame, as 16 hexadecimal digits.
///
/// Source: Fowler, Noll, Vo; parameters from RFC 9923 (memory). A mask writes each figure one way, so turned and mirrored copies
/// have the same. Among 10⁵ figures two that differ share one with a chance of 3 in 10¹⁰.
pub(super) fn of(figure: &Figure) -> String {
    let mut hash = Fnv::default();
    for ring in figure.rings() {
        // So that points cannot move from one ring to the next.
        hash.add(&(ring.points().len() as u64).to_le_bytes());
        for point in ring.points() {
            hash.add(&point.x.to_le_bytes());
            hash.add(&point.y.to_le_bytes());
        }
    }
    format!("{:016x}", hash.0)
}

struct Fnv(u64);

impl Default for Fnv {
    fn default() -> Self {
        Self(0xcbf2_9ce4_8422_2325)
    }
}

impl Fnv {
    fn add(&mut self, bytes: &[u8]) {
        for byte in bytes {
            self.0 = (self.0 ^ u64::from(*byte)).wrapping_mul(0x0000_0100_0000_01b3);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The published vectors of FNV-1a (memory): of nothing, of "a", of "foobar".
    #[test]
    fn it_is_fnv() {
        for (text, expected) in [
            ("", 0xcbf2_9ce4_8422_2325),
            ("a", 0xaf63_dc4c_8601_ec8c),
            ("foobar", 0x8594_4171_f739_67e8),
        ] {
            let mut hash = Fnv::default();
            hash.add(text.as_bytes());
            assert_eq!(hash.0, expected, "{text}");
        }
    }
}
