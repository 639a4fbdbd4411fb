//! Files put together by hand.

/// One GDSII record.
pub(crate) fn record(tag: u16, data: &[u8]) -> Vec<u8> {
    let length = u16::try_from(data.len() + 4).expect("fits a record");
    [&length.to_be_bytes(), &tag.to_be_bytes(), data].concat()
}

/// A GDSII record of one 16-bit number.
pub(crate) fn short(tag: u16, value: u16) -> Vec<u8> {
    record(tag, &value.to_be_bytes())
}

/// A GDSII XY record.
pub(crate) fn xy(points: &[(i32, i32)]) -> Vec<u8> {
    let data: Vec<u8> = points
        .iter()
        .flat_map(|(x, y)| [x.to_be_bytes(), y.to_be_bytes()].concat())
        .collect();
    record(0x1003, &data)
}

/// A GDSII element on layer 1/0.
pub(crate) fn boundary(points: &[(i32, i32)]) -> Vec<u8> {
    [
        record(0x0800, &[]),
        short(0x0D02, 1),
        short(0x0E02, 0),
        xy(points),
        record(0x1100, &[]),
    ]
    .concat()
}

/// A GDSII placement.
pub(crate) fn sref(name: &[u8]) -> Vec<u8> {
    [
        record(0x0A00, &[]),
        record(0x1206, name),
        xy(&[(0, 0)]),
        record(0x1100, &[]),
    ]
    .concat()
}

/// A GDSII library of named cells, 1 nm.
pub(crate) fn library(cells: &[(&[u8], Vec<u8>)]) -> Vec<u8> {
    let micro = [0x3E, 0x41, 0x89, 0x37, 0x4B, 0xC6, 0xA7, 0xF0];
    let nano = [0x39, 0x44, 0xB8, 0x2F, 0xA0, 0x9B, 0x5A, 0x54];
    let mut bytes = [
        short(0x0002, 600),
        record(0x0102, &[0; 24]),
        record(0x0206, b"LIB\0"),
        record(0x0305, &[micro, nano].concat()),
    ]
    .concat();
    for (name, contents) in cells {
        bytes.extend(record(0x0502, &[0; 24]));
        bytes.extend(record(0x0606, name));
        bytes.extend(contents);
        bytes.extend(record(0x0700, &[]));
    }
    bytes.extend(record(0x0400, &[]));
    bytes
}

/// An OASIS file of some records, 1 nm.
pub(crate) fn oasis(body: &[u8]) -> Vec<u8> {
    let mut bytes = b"%SEMI-OASIS\r\n\x01\x031.0\x00\xE8\x07\x01".to_vec();
    bytes.extend(body);
    // END: its identifier, twelve table offsets, a padding string of 240 bytes behind two of length, no validation.
    bytes.push(2);
    bytes.extend([0; 12]);
    bytes.extend([0xF0, 0x01]);
    bytes.extend([0; 240]);
    bytes.push(0);
    bytes
}
