//! Broken files give errors: no panic, no hang, no memory out of proportion.

use std::io::Write;

use shotwright::layout;

use super::fixture;

/// Small files of every format, each with what may be cut off its end unnoticed.
fn victims() -> Vec<(&'static str, Vec<u8>, usize)> {
    let wkt = "POLYGON ((0 0, 100 0, 100 50, 0 50, 0 0), (10 10, 10 20, 30.5 20, 10 10))";
    let mut zipped = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::fast());
    zipped
        .write_all(&fixture("nested.gds"))
        .expect("writes to memory");
    let mut victims = vec![
        ("wkt", wkt.into(), 0),
        // The decoder stops asking once ENDLIB is read: the eight bytes of gzip trailer may be missing.
        ("gzip", zipped.finish().expect("writes to memory"), 8),
        ("hand-records.gds", fixture("hand-records.gds"), 1000),
    ];
    for name in [
        "nested.gds",
        "paths.gds",
        "nested.oas",
        "nested-cblock.oas",
        "figures-cblock.oas",
        "hand-modal.oas",
        "hand-relative.oas",
        "hand-repetitions.oas",
        "hand-points.oas",
        "hand-compact.oas",
        "hand-trapezoids.oas",
        "hand-paths.oas",
        "hand-names.oas",
        "circles.oas",
    ] {
        victims.push((name, fixture(name), 0));
    }
    victims
}

#[test]
fn files_cut_short_anywhere_are_refused() {
    for (name, bytes, spare) in victims() {
        assert!(layout::read(&bytes, name).is_ok(), "{name}");
        for length in 0..bytes.len() - spare {
            let cut = layout::read(&bytes[..length], name);
            assert!(
                cut.is_err(),
                "{name} cut to {length} of {} bytes",
                bytes.len()
            );
        }
    }
}

/// A small generator of its own, so that a failure can be run again from its number.
struct Random(u64);

impl Random {
    /// xorshift64* (Vigna, ACM TOMS 42 (2016) 30).
    fn next(&mut self) -> usize {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        usize::try_from(self.0.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 33).expect("31 bits")
    }

    fn below(&mut self, n: usize) -> usize {
        self.next() % n.max(1)
    }
}

fn mutate(bytes: &mut Vec<u8>, random: &mut Random) {
    for _ in 0..1 + random.below(4) {
        let at = random.below(bytes.len());
        let byte = u8::try_from(random.below(256)).expect("a byte");
        match random.below(6) {
            0 if !bytes.is_empty() => bytes[at] = byte,
            1 if !bytes.is_empty() => bytes[at] ^= 1 << (byte & 7),
            2 => bytes.insert(at, byte),
            3 if !bytes.is_empty() => {
                bytes.remove(at);
            }
            4 => {
                let end = bytes.len().min(at + random.below(32));
                let copy = bytes[at..end].to_vec();
                let to = random.below(bytes.len());
                bytes.splice(to..to, copy);
            }
            // Greatest values where lengths and counts may stand.
            5 => {
                let end = bytes.len().min(at + random.below(9));
                bytes[at..end].fill(0xFF);
            }
            _ => {}
        }
    }
}

#[test]
fn twenty_thousand_mutations_neither_panic_nor_hang() {
    let victims = victims();
    let (mut taken, mut refused) = (0, 0);
    for seed in 0..20_000_u64 {
        let (name, original, _) = &victims[usize::try_from(seed).expect("small") % victims.len()];
        let mut random = Random(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        let mut bytes = original.clone();
        if name.ends_with(".oas") {
            // Keep END in place, or nothing before it would ever be looked at.
            let end = bytes.split_off(bytes.len() - 256);
            let mut body = bytes.split_off(13);
            mutate(&mut body, &mut random);
            bytes.extend(body);
            bytes.extend(end);
        } else {
            mutate(&mut bytes, &mut random);
        }
        match layout::read(&bytes, name) {
            Ok(layout) => {
                let _ = layout.summary();
                taken += 1;
            }
            Err(e) => {
                assert!(!e.to_string().is_empty(), "seed {seed}");
                refused += 1;
            }
        }
    }
    // Both must happen, or the mutations test nothing.
    assert!(
        taken > 500 && refused > 5000,
        "{taken} taken, {refused} refused"
    );
}
