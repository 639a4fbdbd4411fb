//! How fast layouts are read, from memory: `read/<format>/<polygons>`.

use std::hint::black_box;
use std::io::Write;

use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};
use flate2::{Compression, write::DeflateEncoder};
use shotwright::layout;

const POLYGONS: [u32; 2] = [1_000, 100_000];

/// Places that look random and are the same each time, in a square of 10 µm.
fn places(n: u32) -> impl Iterator<Item = [i32; 2]> {
    (0..n).map(|i| {
        let h = i.wrapping_mul(0x9E37_79B9);
        [h >> 16, h & 0xFFFF].map(|v| i32::try_from(v % 10_000).unwrap_or(0))
    })
}

fn record(tag: u16, data: &[u8]) -> Vec<u8> {
    let length = u16::try_from(data.len() + 4).unwrap_or(u16::MAX);
    [&length.to_be_bytes(), &tag.to_be_bytes(), data].concat()
}

/// One cell of rectangles on layer 1/0.
fn gdsii(n: u32) -> Vec<u8> {
    let nano = [0x39, 0x44, 0xB8, 0x2F, 0xA0, 0x9B, 0x5A, 0x54];
    let mut bytes = [
        record(0x0002, &[2, 88]),
        record(0x0305, &[nano, nano].concat()),
        record(0x0502, &[0; 24]),
        record(0x0606, b"TOP\0"),
    ]
    .concat();
    for [x, y] in places(n) {
        let corners = [
            [x, y],
            [x + 300, y],
            [x + 300, y + 200],
            [x, y + 200],
            [x, y],
        ];
        let points: Vec<u8> = corners
            .iter()
            .flatten()
            .flat_map(|v| v.to_be_bytes())
            .collect();
        bytes.extend(record(0x0800, &[]));
        bytes.extend(record(0x0D02, &[0, 1]));
        bytes.extend(record(0x0E02, &[0, 0]));
        bytes.extend(record(0x1003, &points));
        bytes.extend(record(0x1100, &[]));
    }
    bytes.extend(record(0x0700, &[]));
    bytes.extend(record(0x0400, &[]));
    bytes
}

fn unsigned(mut v: u64, out: &mut Vec<u8>) {
    while v > 0x7F {
        out.push(u8::try_from(v & 0x7F).unwrap_or(0) | 0x80);
        v >>= 7;
    }
    out.push(u8::try_from(v).unwrap_or(0));
}

/// The same rectangles in one CBLOCK.
fn oasis(n: u32) -> Vec<u8> {
    let mut body = Vec::new();
    for [x, y] in places(n) {
        body.extend([20, 0b0111_1011, 1, 0]);
        for v in [300, 200, 2 * x, 2 * y] {
            unsigned(u64::try_from(v).unwrap_or(0), &mut body);
        }
    }
    let mut deflate = DeflateEncoder::new(Vec::new(), Compression::default());
    let deflated = deflate.write_all(&body).and_then(|()| deflate.finish());
    let deflated = deflated.unwrap_or_default();
    let mut bytes = b"%SEMI-OASIS\r\n\x01\x031.0\x00\xE8\x07\x01\x0E\x03TOP\x22\x00".to_vec();
    unsigned(body.len() as u64, &mut bytes);
    unsigned(deflated.len() as u64, &mut bytes);
    bytes.extend(deflated);
    bytes.push(2);
    bytes.extend([0; 12]);
    bytes.extend([0xF0, 0x01]);
    bytes.extend([0; 241]);
    bytes
}

fn read(c: &mut Criterion) {
    for (format, make) in [("gdsii", gdsii as fn(u32) -> Vec<u8>), ("oasis", oasis)] {
        let mut group = c.benchmark_group(format!("read/{format}"));
        for n in POLYGONS {
            let bytes = make(n);
            let polygons = layout::read(&bytes, "bench").map(|l| l.cells[0].shapes.len());
            assert_eq!(polygons.ok(), usize::try_from(n).ok());
            group.throughput(Throughput::Bytes(bytes.len() as u64));
            group.bench_with_input(BenchmarkId::from_parameter(n), &bytes, |b, bytes| {
                b.iter(|| black_box(layout::read(bytes, "bench")));
            });
        }
        group.finish();
    }
}

criterion_group!(benches, read);
criterion_main!(benches);
