//! What the readers accept, repair and refuse, and how they say it.

use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Layout, LayoutError, Place};

use super::bytes::{boundary, library, oasis, record, short, sref, xy};
use super::{fixture, flat};

const SQUARE: [(i32, i32); 5] = [(0, 0), (10, 0), (10, 10), (0, 10), (0, 0)];

fn read(bytes: &[u8]) -> Result<Layout, LayoutError> {
    layout::read(bytes, "here")
}

fn complaint(bytes: &[u8]) -> String {
    match read(bytes) {
        Err(e) => e.to_string(),
        Ok(layout) => panic!("taken: {layout:?}"),
    }
}

#[test]
fn unknown_contents_are_shown() {
    assert!(complaint(b"").contains("nothing"));
    assert!(complaint(b"\x89PNG\r\n").contains("bytes 89 50 4E 47 0D 0A"));
    let text = complaint(b"LINESTRING (0 0, 1 1)");
    assert!(
        text.starts_with("here: starts with `LINESTRING (0 0,`"),
        "{text}"
    );
    assert!(text.contains("GDSII") && text.contains("OASIS") && text.contains("WKT"));
    let missing = layout::open("no/such/file.gds").expect_err("does not exist");
    assert!(
        matches!(missing, LayoutError::Unreadable { .. }),
        "{missing}"
    );
}

#[test]
fn cells_that_contain_themselves_are_named() {
    let circle = library(&[
        (b"AA", sref(b"BB")),
        (b"BB", sref(b"CC")),
        (b"CC", sref(b"BB")),
    ]);
    assert_eq!(
        complaint(&circle),
        "here: cells place each other in a circle: `BB`, `CC`"
    );
    let own = oasis(b"\x0E\x01A\x11\xB0\x01A\x00\x00");
    assert_eq!(
        complaint(&own),
        "here: cells place each other in a circle: `A`"
    );
}

#[test]
fn missing_and_twice_defined_cells_are_named() {
    let missing = library(&[(b"TOP\0", [sref(b"NO"), sref(b"NEITHER\0")].concat())]);
    let text = complaint(&missing);
    assert_eq!(
        text,
        "here: places cells that it does not define: `NEITHER`, `NO`"
    );
    let twice = library(&[(b"AA", boundary(&SQUARE)), (b"AA", vec![])]);
    assert_eq!(complaint(&twice), "here: cell `AA` is defined twice");
    // A placement by a number that no CELLNAME explains.
    let text = complaint(&oasis(b"\x0E\x01A\x11\xF0\x07\x00\x00"));
    assert!(
        text.contains("cell reference number 7 without a name"),
        "{text}"
    );
}

#[test]
fn nesting_has_a_limit() {
    let name = |i: usize| format!("C{i:05}").into_bytes();
    let names: Vec<Vec<u8>> = (0..20_000).map(name).collect();
    let chain = |n: usize| {
        let cells: Vec<(&[u8], Vec<u8>)> = (0..n)
            .map(|i| {
                let inside = if i == 0 {
                    boundary(&SQUARE)
                } else {
                    sref(&names[i - 1])
                };
                (names[i].as_slice(), inside)
            })
            .collect();
        library(&cells)
    };
    assert!(read(&chain(129)).is_ok());
    let text = complaint(&chain(20_000));
    assert_eq!(text, "here: cells nest 19999 deep, expected at most 128");
}

#[test]
fn gdsii_beyond_the_letter_is_taken() {
    // BOX, 16-bit layers, absolute width, an unclosed outline, padding: gdstk writes none of them.
    let layout = read(&fixture("hand-records.gds")).expect("reads");
    let flat = flat::measure(&layout);
    let boxes = &flat["3/9"];
    assert_eq!((boxes.polygons, boxes.area), (1, 2100.0));
    let path = &flat["40000/65535"];
    assert_eq!(path.bounds, [0.0, -20.0, 520.0, 200.0]);
    // By hand: 500 × 40 and 200 × 40, less the quarter they share, plus the outer corner.
    assert_eq!(path.area, 20_000.0 + 8_000.0 - 400.0 + 400.0);
    assert_eq!(flat["4/0"].area, 50.0);
    assert_eq!(layout.notes.len(), 2, "{:?}", layout.notes);
    assert!(layout.notes[0].starts_with("1 × outline that was not closed"));
    assert!(layout.notes[1].starts_with("1 × path of absolute width"));
    assert_eq!(layout.open_outlines, 1);
}

#[test]
fn outlines_run_on_in_further_xy_records() {
    // 20 000 points on a parabola and back along its chord: area of the segment is n³/6 (Archimedes), less what the chords cut off, n/6.
    let n = 1000;
    let mut points: Vec<(i32, i32)> = (0..=n).map(|i| (i, i * i)).collect();
    points.extend((1..n).rev().map(|i| (i, i * n)));
    points.push(points[0]);
    let mut element = [record(0x0800, &[]), short(0x0D02, 1), short(0x0E02, 0)].concat();
    for part in points.chunks(300) {
        element.extend(xy(part));
    }
    element.extend(record(0x1100, &[]));
    let layout = read(&library(&[(b"TOP\0", element)])).expect("reads");
    assert_eq!(layout.cells[0].shapes.to_vec()[0].points.len(), 2000);
    let n = f64::from(n);
    let flat = flat::measure(&layout);
    assert_eq!(flat["1/0"].area, (n.powi(3) - n) / 6.0);
}

#[test]
fn cells_longer_than_a_stretch_are_stitched_in_order() {
    // 6 MB in one cell, one more behind, so that stretches end within the first and the second starts within one.
    let shapes: Vec<u8> = (0..100_000)
        .flat_map(|i| boundary(&[(i, 0), (i + 1, 0), (i, 1)]))
        .collect();
    let layout = read(&library(&[(b"AA", shapes), (b"BB", sref(b"AA"))])).expect("reads");
    let xs: Vec<i64> = layout.cells[0]
        .shapes
        .iter()
        .filter_map(|s| Some(s.points.iter().next()?.x))
        .collect();
    assert_eq!(xs, (0..100_000).collect::<Vec<i64>>());
    assert_eq!(layout.cells[1].placements[0].cell.0, 0);
}

#[test]
fn arrays_count_to_the_end_of_sixteen_bits() {
    let array = [
        record(0x0B00, &[]),
        record(0x1206, b"AA"),
        record(0x1302, &[0xFF, 0xFF, 0x9C, 0x40]),
        xy(&[(0, 0), (65_535 * 20, 0), (0, 40_000 * 20)]),
        record(0x1100, &[]),
    ]
    .concat();
    let layout = read(&library(&[(b"AA", boundary(&SQUARE)), (b"BB", array)])).expect("reads");
    assert_eq!(layout.summary().placements, 65_535 * 40_000);
}

/// Found by fuzzing: some hundred bytes asked for a list of 3.7 million places.
#[test]
fn arrays_off_the_grid_list_columns_and_rows_and_not_their_product() {
    let array = [
        record(0x0B00, &[]),
        record(0x1206, b"AA"),
        record(0x1302, &[0x00, 0x44, 0xD6, 0x03]),
        xy(&[(2, 7), (2 + 1001, 7 + 500), (2, 7 + 54_000)]),
        record(0x1100, &[]),
    ]
    .concat();
    let square = boundary(&[(0, 0), (1, 0), (1, 1), (0, 1)]);
    let layout = read(&library(&[(b"AA", square), (b"BB", array)])).expect("reads");
    let repetition = &layout.cells[1].placements[0].repetition;
    assert_eq!(repetition.count(), 0x44 * 0xD603);
    let Repetition::Nested(parts) = repetition else {
        panic!("one list of all places");
    };
    let listed: u128 = parts.iter().map(Repetition::count).sum();
    assert_eq!(listed, 0x44 + 0xD603);
    // Each span is divided and rounded: column 30 of 68 over (1001, 500), row 27 406 of 54 787 over 54 000.
    let places: Vec<Point> = repetition.displacements().take(0x44 * 27_407).collect();
    let last = places[0x44 * 27_406 + 30];
    assert_eq!(last, Point::new(442, 221 + 27_012));
}

#[test]
fn broken_gdsii_is_refused_with_its_place() {
    let good = library(&[(b"AA", boundary(&SQUARE))]);
    let element = good
        .windows(4)
        .position(|w| w == [0, 4, 8, 0])
        .expect("is there");
    let broken = |at: usize, bytes: &[u8]| {
        let mut file = good.clone();
        file[at..at + bytes.len()].copy_from_slice(bytes);
        complaint(&file)
    };
    let text = broken(element + 4, &[0, 7]);
    let place = format!("here: byte {}: found a record length of 7", element + 4);
    assert!(text.starts_with(&place), "{text}");
    let text = broken(element + 4, &[0, 0]);
    assert!(text.contains("a record length of 0"), "{text}");
    let text = broken(element + 6, &[0x3F, 0x02]);
    assert!(text.contains("record 3F02"), "{text}");
    let text = broken(element + 6, &[0x2B, 0x02]);
    assert!(text.contains("without LAYER"), "{text}");
    // Contents before the first cell.
    let mut stray = good.clone();
    let cell = element - 28 - 6;
    stray.splice(cell..cell, boundary(&SQUARE));
    let text = complaint(&stray);
    let place = format!("here: byte {cell}: found contents of a cell outside any");
    assert!(text.starts_with(&place), "{text}");
    // A cell that never ends.
    let end = good.len() - 8;
    let text = complaint(&[&good[..end], &good[end + 4..]].concat());
    assert!(text.contains("ENDLIB within a cell"), "{text}");
}

#[test]
fn placements_are_turned_magnified_and_noted_when_absolute() {
    // STRANS 8006 is mirrored with absolute magnification and angle; 1.5 and 90 as excess-64 reals.
    let placement = [
        record(0x0A00, &[]),
        record(0x1206, b"AA"),
        short(0x1A01, 0x8006),
        record(0x1B05, &[0x41, 0x18, 0, 0, 0, 0, 0, 0]),
        record(0x1C05, &[0x42, 0x5A, 0, 0, 0, 0, 0, 0]),
        xy(&[(100, 200)]),
        record(0x1100, &[]),
    ]
    .concat();
    let cells: [(&[u8], Vec<u8>); 2] = [
        (
            b"AA",
            boundary(&[(0, 0), (20, 0), (20, 10), (0, 10), (0, 0)]),
        ),
        (b"BB", placement),
    ];
    let layout = read(&library(&cells)).expect("reads");
    let placed = &layout.cells[1].placements[0];
    assert_eq!(
        (placed.mirror, placed.magnification, placed.angle_deg),
        (true, 1.5, 90.0)
    );
    // By hand: (20, 10) → mirrored (20, −10) → magnified (30, −15) → turned (15, 30) → shifted.
    assert_eq!(
        flat::measure(&layout)["1/0"].bounds.map(f64::round),
        [100.0, 200.0, 115.0, 230.0]
    );
    assert!(layout.notes[0].starts_with("1 × placement with absolute magnification"));
    // A negative magnification is none.
    let mut negative = library(&cells);
    let at = negative
        .windows(4)
        .position(|w| w == [0x41, 0x18, 0, 0])
        .expect("is there");
    negative[at] = 0xC1;
    assert!(
        complaint(&negative).contains("found a magnification of -1.5, expected a positive number")
    );
}

#[test]
fn oasis_checksums_are_verified() {
    for (name, scheme) in [("nested.oas", "CRC32"), ("nested-cblock.oas", "CHECKSUM32")] {
        let mut bytes = fixture(name);
        assert!(read(&bytes).is_ok(), "{name}");
        bytes[40] ^= 1;
        let text = complaint(&bytes);
        assert!(
            text.contains(scheme) && text.contains("hint: the file was damaged"),
            "{text}"
        );
    }
}

#[test]
fn the_end_record_closes_the_file_after_256_bytes() {
    let good = oasis(b"\x0E\x01A");
    assert!(read(&good).is_ok());
    assert!(complaint(&good[..good.len() - 1]).contains("256 bytes long"));
    assert!(complaint(&[&good[..], &[0]].concat()).contains("256 bytes long"));
    let two_ends = [&good[..], &good[good.len() - 256..]].concat();
    assert!(complaint(&two_ends).contains("END within the file"));
}

#[test]
fn oasis_values_left_out_without_precedent_are_refused() {
    // Each follows CELL "A"; modal variables do not survive a CELL record (SEMI P39-0304E2, section 10).
    let cases: [(&[u8], &str); 9] = [
        (&[20, 0b0001_1000, 0, 0], "layer or datatype"),
        (&[20, 0b0001_1011, 1, 0, 0, 0], "width or height"),
        (&[21, 0b0001_1011, 1, 0, 0, 0], "point list"),
        (&[22, 0b0001_1011, 1, 0, 0, 0], "half width"),
        (
            &[26, 0b0111_1011, 1, 0, 9, 9, 0, 0],
            "kind of compact trapezoid",
        ),
        (&[27, 0b0001_1011, 1, 0, 0, 0], "radius"),
        (&[17, 0b0011_0000, 0, 0], "cell placed"),
        (&[19, 0b0001_1011, 1, 0, 0, 0], "the text"),
        (&[20, 0b0111_1111, 1, 0, 9, 9, 0, 0, 0], "repetition type 0"),
    ];
    for (body, what) in cases {
        let text = complaint(&oasis(&[b"\x0E\x01A", body].concat()));
        assert!(text.contains(what), "{text}, expected {what}");
    }
    let two_cells: &[u8] = &[
        14,
        1,
        b'A',
        20,
        0b0111_1011,
        1,
        0,
        9,
        9,
        0,
        0,
        14,
        1,
        b'B',
        20,
        0b0001_1000,
        0,
        0,
    ];
    assert!(complaint(&oasis(two_cells)).contains("layer or datatype"));
}

#[test]
fn extension_records_are_read_past_and_noted() {
    let mut body = b"\x0E\x01A".to_vec();
    body.extend(b"\x20\x05\x03xyz"); // XELEMENT
    body.extend(b"\x21\x1B\x07\x01\x00\x02ab\x00\x00"); // XGEOMETRY
    body.extend(b"\x14\x7B\x01\x00\x09\x09\x00\x00"); // RECTANGLE
    body.extend(b"\x1E\x04\x02nn\x1F\x04\x02mm\x01"); // XNAMEs
    let layout = read(&oasis(&body)).expect("reads");
    assert_eq!(layout.cells[0].shapes.len(), 1);
    assert_eq!(
        layout.notes,
        ["1 × XELEMENT skipped", "1 × XGEOMETRY skipped"]
    );
}

/// A CBLOCK record around some records.
fn block(contents: &[u8]) -> Vec<u8> {
    use std::io::Write;
    let level = flate2::Compression::best();
    let mut deflate = flate2::write::DeflateEncoder::new(Vec::new(), level);
    deflate.write_all(contents).expect("writes to memory");
    let deflated = deflate.finish().expect("writes to memory");
    let mut block = vec![34, 0];
    for mut length in [contents.len(), deflated.len()] {
        while length > 0x7F {
            block.push(u8::try_from(length & 0x7F).expect("seven bits") | 0x80);
            length >>= 7;
        }
        block.push(u8::try_from(length).expect("seven bits"));
    }
    [block, deflated].concat()
}

#[test]
fn a_cblock_within_a_cblock_is_fatal() {
    let square = b"\x14\x7B\x01\x00\x09\x09\x00\x00";
    let cell = |contents: &[u8]| oasis(&[b"\x0E\x01A", contents].concat());
    let once = read(&cell(&block(square))).expect("reads");
    assert_eq!(once.cells[0].shapes.len(), 1);
    let twice = complaint(&cell(&block(&block(square))));
    assert!(
        twice.contains("within the CBLOCK at byte") && twice.contains("a CBLOCK within a CBLOCK")
    );
    // A false size, too small and too great.
    for size in [7, 9, 120] {
        let mut lying = block(square);
        lying[2] = size;
        assert!(complaint(&cell(&lying)).contains("inflate"), "size {size}");
    }
}

#[test]
fn coordinates_beyond_the_limit_are_refused() {
    // 2^52 + 1 as the width of a rectangle, and 2^52 reached by two steps of a list.
    let wide = b"\x0E\x01A\x14\x7B\x01\x00\x81\x80\x80\x80\x80\x80\x80\x08\x09\x00\x00";
    assert!(complaint(&oasis(wide)).contains("2^52"));
    let far =
        b"\x0E\x01A\x14\x7F\x01\x00\x09\x09\x00\x00\x05\x00\x81\x80\x80\x80\x80\x80\x80\x04\x04";
    assert!(complaint(&oasis(far)).contains("2^52"));
    let lattice =
        b"\x0E\x01A\x14\x7F\x01\x00\x09\x09\x00\x00\x02\x80\x80\x80\x80\x80\x80\x80\x80\x10\x09";
    assert!(complaint(&oasis(lattice)).contains("2^52"));
}

#[test]
fn a_few_bytes_cannot_ask_for_gigabytes() {
    // A list of 100 000 places, then 3-byte rectangles that repeat it: 20 000 of them would fill 32 GB.
    let mut body = b"\x0E\x01A\x14\x7F\x01\x00\x09\x09\x00\x00\x04\x9F\x8D\x06".to_vec();
    body.extend(vec![1; 100_000]);
    for _ in 0..20_000 {
        body.extend([20, 0b0000_0100, 0]);
    }
    assert!(complaint(&oasis(&body)).contains("unfold to too many points"));
    // 128 MiB of PAD records deflate to a thousandth of that.
    let bomb = oasis(&block(&vec![0; 128 << 20]));
    assert!(bomb.len() < 200_000);
    assert!(complaint(&bomb).contains("inflate to too many bytes"));
}

#[test]
fn wkt_reads_holes_decimals_and_empties() {
    let text = "POLYGON ((0 0, 100 0, 100 50, 0 50, 0 0), (10 10, 10 20, 30.5 20, 30.5 10, 10 10))\n\
                multipolygon(((0 0,1e1 0,0 1e1,0 0)),((20 0,30 0,20 10)))\r\nPOLYGON EMPTY\nMULTIPOLYGON EMPTY\n\n";
    let layout = read(text.as_bytes()).expect("reads");
    assert_eq!(layout.unit.0, 1e-3);
    let areas: Vec<f64> = layout.cells[0]
        .shapes
        .iter()
        .map(|s| shotwright::geom::Ring::new(s.points.iter().collect()).expect("a ring"))
        .map(|ring| ring.area_two() as f64 / 2e6)
        .collect();
    assert_eq!(areas, [5000.0 - 205.0, 50.0, 50.0]);
    assert_eq!(
        layout.notes,
        ["1 × outline that was not closed: closed by a straight edge"]
    );
    // The keyhole vanishes and the hole is real.
    let first = layout.cells[0].shapes.to_vec().swap_remove(0);
    let rings: Vec<_> = shotwright::geom::Ring::new(first.points)
        .into_iter()
        .collect();
    let merged = shotwright::geom::merge(&rings);
    assert_eq!((merged.len(), merged[0].holes().len()), (1, 1));
}

#[test]
fn wkt_is_refused_by_line_and_column() {
    let cases = [
        (
            "POLYGON ((0 0, 1 0, 1 x, 0 0))",
            1,
            23,
            "found `x`, expected a number",
        ),
        (
            "POLYGON ((0 0, 1 0, 1 1, 0 0))\nPOINT (0 0)",
            2,
            1,
            "expected POLYGON or MULTIPOLYGON",
        ),
        (
            "POLYGON ((0 0, 1 0, 1 1, 0 0)",
            1,
            30,
            "found the end of the data, expected `)`",
        ),
        (
            "POLYGON ((0 0, 1 0, 1 nan, 0 0))",
            1,
            23,
            "expected a number",
        ),
        (
            "POLYGON ((0 0, 1 0, 0 0))",
            1,
            10,
            "a ring of 2 different points",
        ),
        (
            "POLYGON Z ((0 0 0, 1 0 0, 0 1 0, 0 0 0))",
            1,
            9,
            "`(` or EMPTY",
        ),
        (
            "POLYGON ((0 0 5, 1 0 5, 0 1 5, 0 0 5))",
            1,
            15,
            "found `5`, expected `)`",
        ),
        (
            "POLYGON ((0 0, 9e12 0, 0 1, 0 0))",
            1,
            16,
            "expected a number of nanometres within",
        ),
    ];
    for (text, line, column, what) in cases {
        match read(text.as_bytes()) {
            Err(e @ LayoutError::Malformed { place, .. }) => {
                assert_eq!(place, Place::Text { line, column }, "{e}");
                assert!(e.to_string().contains(what), "{e}");
            }
            other => panic!("{text}: {other:?}"),
        }
    }
}
