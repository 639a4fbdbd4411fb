"""Writes the fixtures in this folder and expected.json with what gdstk 1.0.2 says they hold.

The layouts are invented. Expected values are those of gdstk, a general-purpose GDSII and OASIS library, after flattening: polygons, summed
area (database units squared) and bounding box (database units) by layer. Run: python make_fixtures.py
"""
import json, math, pathlib, struct, zlib
import gdstk

here = pathlib.Path(__file__).parent
expected = {}


def measure(path):
    """What gdstk reads back, with circles and round ends within 0.1 database units."""
    read = gdstk.read_gds if path.suffix == ".gds" else gdstk.read_oas
    lib = read(str(path), tolerance=1e-4)
    unit = lib.precision / lib.unit
    layers = {}
    for top in lib.top_level():
        for p in top.get_polygons(apply_repetitions=True, include_paths=True):
            box = p.bounding_box()
            key = f"{p.layer}/{p.datatype}"
            got = layers.setdefault(key, {"polygons": 0, "area": 0.0, "box": [math.inf, math.inf, -math.inf, -math.inf]})
            got["polygons"] += 1
            got["area"] += p.area() / unit**2
            b = got["box"]
            got["box"] = [min(b[0], box[0][0] / unit), min(b[1], box[0][1] / unit), max(b[2], box[1][0] / unit), max(b[3], box[1][1] / unit)]
    for got in layers.values():
        got["area"] = round(got["area"], 3)
        got["box"] = [round(v, 3) for v in got["box"]]
    return {"unit_nm": round(lib.precision * 1e9, 9), "cells": len(lib.cells), "layers": dict(sorted(layers.items()))}


def note(name):
    expected[name] = measure(here / name)


def write(lib, name, **options):
    if name.endswith(".gds"):
        lib.write_gds(str(here / name), max_points=0)
    else:
        lib.write_oas(str(here / name), **options)
    note(name)


def library():
    return gdstk.Library(unit=1e-6, precision=1e-9)


def nested(angle=math.pi / 2, magnification=1.0):
    """Three levels, arrays, mirrors; an L whose eight orientations differ."""
    lib = library()
    ell = lib.new_cell("ELL")
    ell.add(gdstk.Polygon([(0, 0), (0.3, 0), (0.3, 0.1), (0.1, 0.1), (0.1, 0.2), (0, 0.2)], layer=1))
    ell.add(gdstk.rectangle((0.05, 0.3), (0.15, 0.35), layer=2, datatype=7))
    mid = lib.new_cell("MID")
    mid.add(gdstk.Reference(ell, (1, 0), rotation=angle, x_reflection=True, magnification=magnification))
    mid.add(gdstk.Reference(ell, (0, 2), columns=4, rows=3, spacing=(0.5, 0.6)))
    top = lib.new_cell("TOP")
    top.add(gdstk.Reference(mid, (0, 0)))
    top.add(gdstk.Reference(mid, (10, 10), rotation=math.pi, columns=2, rows=2, spacing=(3, 4)))
    top.add(gdstk.Reference(mid, (-10, 5), rotation=3 * math.pi / 2, x_reflection=True))
    return lib


def figures():
    """Outlines of every kind of step."""
    lib = library()
    c = lib.new_cell("FIGURES")
    c.add(gdstk.Polygon([(0, 0), (2, 0), (2, 1), (1, 1), (1, 2), (0, 2)], layer=1))
    c.add(gdstk.Polygon([(5, 0), (6, 1), (6, 3), (4, 3), (4, 1)], layer=1))
    c.add(gdstk.Polygon([(10, 0), (13, 0.777), (12.1, 2.3), (9.4, 1.9)], layer=1))
    c.add(gdstk.rectangle((-3, -3), (-1, -2), layer=2))
    c.add(gdstk.rectangle((-6, -3), (-5, -2), layer=2))
    ring = [(20 + 3 * math.cos(t / 60 * math.tau), 3 * math.sin(t / 60 * math.tau)) for t in range(61)]
    hole = [(20 + 1 * math.cos(-t / 40 * math.tau), 1 * math.sin(-t / 40 * math.tau)) for t in range(41)]
    c.add(gdstk.Polygon([(round(x, 3), round(y, 3)) for x, y in ring + hole], layer=3, datatype=1))
    c.add(gdstk.Label("ignored", (0, 0)))
    return lib


def trapezoids():
    lib = library()
    c = lib.new_cell("TRAPEZOIDS")
    shapes = [
        [(0, 0), (9, 0), (7, 2), (3, 2)], [(1, 0), (5, 0), (9, 2), (0, 2)], [(0, 0), (5, 0), (7, 2), (2, 2)],
        [(0, 0), (2, 1), (2, 7), (0, 9)], [(0, 1), (2, 0), (2, 9), (0, 4)], [(0, 0), (2, 3), (2, 9), (0, 5)],
        [(0, 0), (9, 0), (7, 3), (0, 3)], [(0, 0), (9, 0), (9, 3), (2, 3)], [(0, 0), (2, 0), (2, 9), (0, 4)],
    ]
    for i, shape in enumerate(shapes):
        c.add(gdstk.Polygon([(x + 12 * i, y) for x, y in shape], layer=1))
    w, h = 9, 3
    wide = [
        [(0, 0), (w, 0), (w - h, h), (0, h)], [(0, 0), (w - h, 0), (w, h), (0, h)], [(0, 0), (w, 0), (w, h), (h, h)],
        [(h, 0), (w, 0), (w, h), (0, h)], [(0, 0), (w, 0), (w - h, h), (h, h)], [(h, 0), (w - h, 0), (w, h), (0, h)],
        [(0, 0), (w - h, 0), (w, h), (h, h)], [(h, 0), (w, 0), (w - h, h), (0, h)],
    ]
    triangles = [
        [(0, 0), (h, 0), (0, h)], [(0, 0), (h, h), (0, h)], [(0, 0), (h, 0), (h, h)], [(h, 0), (h, h), (0, h)],
        [(0, 0), (2 * h, 0), (h, h)], [(h, 0), (2 * h, h), (0, h)],
    ]
    for i, shape in enumerate(wide + triangles):
        c.add(gdstk.Polygon([(x + 12 * i, y + 20) for x, y in shape], layer=2))
        c.add(gdstk.Polygon([(y + 12 * i, x + 40) for x, y in reversed(shape)], layer=3))
    return lib


def paths(gdsii):
    lib = library()
    c = lib.new_cell("PATHS")
    bends = [(0, 0), (5, 0), (5, 4), (9, 4), (9, 9)]
    for i, ends in enumerate(["flush", "extended", (0.3, 0.7), (-0.2, 0.1), (0.5, 0)]):
        c.add(gdstk.FlexPath([(x + 12 * i, y) for x, y in bends], 1, ends=ends, simple_path=True, layer=1, datatype=i))
    c.add(gdstk.FlexPath([(0, 20), (5, 20), (8, 23), (8, 28)], 0.8, simple_path=True, layer=2))
    c.add(gdstk.FlexPath([(20, 20), (25, 20), (21, 23)], 0.6, simple_path=True, layer=3))
    if gdsii:
        c.add(gdstk.FlexPath([(30, 20), (35, 20), (35, 25)], 2, ends="round", simple_path=True, layer=4))
    return lib


def repetitions():
    lib = library()
    c = lib.new_cell("REPETITIONS")
    kinds = [
        gdstk.Repetition(columns=4, rows=3, spacing=(2, 3)), gdstk.Repetition(columns=5, rows=1, spacing=(2, 0)), gdstk.Repetition(columns=1, rows=4, spacing=(0, 2)),
        gdstk.Repetition(x_offsets=[1.5, 4, 5.125]), gdstk.Repetition(y_offsets=[2, 5, 5.5]),
        gdstk.Repetition(columns=3, rows=2, v1=(2, 1), v2=(-1, 3)), gdstk.Repetition(offsets=[(2, 1), (-1, 3), (4, -2.5)]),
    ]
    for i, repetition in enumerate(kinds):
        p = gdstk.Polygon([(0, 20 * i), (1, 20 * i), (0.25, 20 * i + 1)], layer=1, datatype=i)
        p.repetition = repetition
        c.add(p)
    small = lib.new_cell("SMALL")
    small.add(gdstk.rectangle((0, 0), (0.5, 0.25), layer=2))
    for i, repetition in enumerate(kinds):
        r = gdstk.Reference(small, (40, 20 * i), rotation=math.pi / 2 * (i % 4))
        r.repetition = repetition
        c.add(r)
    return lib


def circles():
    lib = library()
    c = lib.new_cell("CIRCLES")
    for i, r in enumerate([0.05, 0.4, 3]):
        c.add(gdstk.ellipse((10 * i, 0), r, tolerance=1e-4, layer=1, datatype=i))
    return lib


write(nested(), "nested.gds")
write(nested(math.radians(30), 1.5), "turned.gds")
write(nested(math.radians(30), 1.5), "turned.oas", compression_level=0)
write(nested(), "nested.oas", compression_level=0, validation="crc32")
write(nested(), "nested-cblock.oas", compression_level=9, validation="checksum32")
write(figures(), "figures.gds")
write(figures(), "figures.oas", compression_level=0)
write(figures(), "figures-cblock.oas", compression_level=6, standard_properties=True)
write(trapezoids(), "trapezoids.oas", compression_level=0)
write(paths(True), "paths.gds")
write(paths(False), "paths.oas", compression_level=0)
write(repetitions(), "repetitions.gds")
write(repetitions(), "repetitions.oas", compression_level=0)
write(circles(), "circles.oas", compression_level=0, circle_tolerance=1e-3)

# By hand, for what gdstk reads but never writes. Records by number: 1 START, 3 CELLNAME, 13 and 14 CELL, 15 and 16 XY modes, 20 RECTANGLE ...
MAGIC = b"%SEMI-OASIS\r\n"
START = bytes([1, 3]) + b"1.0" + bytes([0, 0xE8, 0x07, 1])
END = bytes([2]) + bytes(12) + bytes([0xF0, 0x01]) + bytes(240) + bytes([0])  # table offsets, 240 bytes of padding, no validation
assert len(END) == 256


def u(v):
    out = bytearray()
    while v > 127:
        out.append(v & 127 | 128)
        v >>= 7
    return bytes(out + bytearray([v]))


def s(v):
    return u(v << 1 if v >= 0 else -v << 1 | 1)


def name(text):
    return u(len(text)) + text.encode()


def by_hand(file, body):
    (here / file).write_bytes(MAGIC + START + body + END)
    note(file)


CELL = bytes([14]) + name("HAND")
# Every field once, then records that leave it out; squares; a property, its repetition; an XNAME behind the cells.
by_hand("hand-modal.oas", CELL
    + bytes([20, 0b01111011]) + u(1) + u(0) + u(100) + u(50) + s(10) + s(20)   # all but a repetition
    + bytes([20, 0b00010000]) + s(300)                                          # y, size, layer as before
    + bytes([20, 0b00001000]) + s(300)                                          # x as before
    + bytes([20, 0b11011001]) + u(2) + u(40) + s(0) + s(0)                       # a square on layer 2
    + bytes([20, 0b00011000]) + s(0) + s(500)                                    # the square's height is modal now
    + bytes([28, 0b00010100]) + name("P") + u(8) + u(7)                          # a property
    + bytes([29])                                                               # and again
    + bytes([20, 0b00100001]) + u(3) + u(90))                                    # its width is modal, its height 90
# Relative and absolute, in x and y apart.
by_hand("hand-relative.oas", CELL + bytes([16])
    + bytes([20, 0b01111011]) + u(1) + u(0) + u(10) + u(10) + s(100) + s(100)
    + bytes([20, 0b00010000]) + s(50) + bytes([20, 0b00011000]) + s(-200) + s(30)
    + bytes([15]) + bytes([20, 0b00010000]) + s(1000) + bytes([16]) + bytes([20, 0b00001000]) + s(7))
# Repetitions 5, 7, 9, 11 and 0.
r = lambda kind, *v: bytes([20, 0b01111111]) + u(1) + u(kind) + u(10) + u(10) + s(0) + s(1000 * kind) + u(kind) + b"".join(v)
by_hand("hand-repetitions.oas", CELL
    + r(5, u(1), u(10), u(3), u(4)) + r(7, u(2), u(5), u(3), u(4), u(9)) + r(9, u(3), u(30 << 2 | 1) + s(40))
    + r(11, u(1), u(10), u(2 << 2 | 1) + s(3), u(5 << 4 | 5 << 1)) + r(0))
# Point lists 1 (vertical first), 2 and 5; then the list itself left out.
p = lambda kind, y, *v: bytes([21, 0b00111011]) + u(1) + u(kind) + u(kind) + u(len(v)) + b"".join(v) + s(0) + s(y)
by_hand("hand-points.oas", CELL
    + p(1, 0, s(100), s(50)) + p(2, 1000, u(80 << 2), u(40 << 2 | 1), u(30 << 2 | 2), u(20 << 2 | 1), u(50 << 2 | 2))
    + p(3, 2000, u(80 << 3), u(40 << 3 | 4), u(120 << 3 | 2)) + p(5, 3000, u(50 << 2 | 1) + s(0), u(10 << 2 | 3) + s(60), u(30 << 2 | 3) + s(-20))
    + bytes([21, 0b00001000]) + s(4000))
# The 26 compact trapezoids, each followed by a rectangle that takes the modal size it leaves (not the last: what a square leaves as
# height is not settled, gdstk keeps the old one).
body = CELL
for kind in range(26):
    both = kind < 16 or kind == 24
    only_height = kind in (20, 21)
    tall = 8 <= kind < 16
    w, h = (30, 100) if tall else (100, 30)
    flags = 0b10011011 | (0b01100000 if both else 0b00100000 if only_height else 0b01000000)
    size = (u(w) if both or not only_height else b"") + (u(h) if both or only_height else b"")
    body += bytes([26, flags]) + u(1) + u(kind) + u(kind) + size + s(200 * kind) + s(0)
    if kind < 25:
        body += bytes([20, 0b00011011]) + u(2) + u(kind) + s(200 * kind) + s(500)
by_hand("hand-compact.oas", body)
# Trapezoids 23, 24, 25 of both orientations and all signs.
body, x = CELL, 0
for record in (23, 24, 25):
    for vertical in (0, 0x80):
        for a, b in ((10, -20), (-10, 20), (15, 25), (-15, -25)):
            slants = {23: s(a) + s(b), 24: s(a), 25: s(b)}[record]
            body += bytes([record, vertical | 0b01111011]) + u(1) + u(0) + u(100) + u(100) + slants + s(x) + s(0)
            x += 150
by_hand("hand-trapezoids.oas", body)
# Paths: extensions given, half width, flush, modal; half width modal.
line = u(0) + u(2) + s(500) + s(300)
by_hand("hand-paths.oas", CELL
    + bytes([22, 0b11111011]) + u(1) + u(0) + u(20) + u(0b1110) + s(70) + line + s(0) + s(0)   # start 70, end half width
    + bytes([22, 0b00001000]) + s(1000) + bytes([22, 0b10001000]) + u(0b0111) + s(-30) + s(2000))
# Cells by name and by number, names by number and in order, LAYERNAMEs of every interval, texts, CBLOCKs in the middle of a cell.
deflate = lambda b: (lambda z: z.compress(b) + z.flush())(zlib.compressobj(9, zlib.DEFLATED, -15))
block = lambda b: bytes([34, 0]) + u(len(b)) + u(len(deflate(b))) + deflate(b)
square = bytes([20, 0b11011011]) + u(1) + u(0) + u(10) + s(0) + s(0)
by_hand("hand-names.oas",
    bytes([11]) + name("all") + u(0) + u(4) + u(1) + u(5) + bytes([12]) + name("some") + u(1) + u(9) + u(2) + u(3) + bytes([11]) + name("one") + u(3) + u(1) + u(3) + u(0)
    + bytes([13]) + u(1) + square + block(bytes([20, 0b00010000]) + s(50)) + bytes([20, 0b00010000]) + s(100)
    + bytes([13]) + u(0) + bytes([17, 0b11110000]) + u(1) + s(0) + s(0) + bytes([17, 0b00110011]) + s(500) + s(0)
    + bytes([17, 0b10110101]) + name("LEAF") + s(0) + s(500) + bytes([18, 0b00110111]) + u(0) + u(2) + u(0) + u(180) + s(900) + s(900)
    + bytes([0, 0]) + block(bytes([19, 0b01111011]) + u(0) + u(1) + u(0) + s(0) + s(0))
    + bytes([3]) + name("ROOT") + bytes([3]) + name("LEAF") + bytes([5]) + name("text") + bytes([7]) + name("prop") + bytes([9]) + name("value"))

# GDSII records that gdstk does not write: BOX, an outline in two XY records, negative width, padding.
def record(tag, data=b""):
    return struct.pack(">HH", 4 + len(data), tag) + data


def xy(*points):
    return record(0x1003, b"".join(struct.pack(">ii", *p) for p in points))


def short(tag, v):
    return record(tag, struct.pack(">H", v))


HEAD = record(0x0002, struct.pack(">H", 600)) + record(0x0102, bytes(24)) + record(0x0206, b"LIB\0") \
    + record(0x0305, bytes.fromhex("3E4189374BC6A7F03944B82FA09B5A54")) + record(0x0502, bytes(24)) + record(0x0606, b"TOP\0")
TAIL = record(0x0700) + record(0x0400)
(here / "hand-records.gds").write_bytes(HEAD
    + record(0x2D00) + short(0x0D02, 3) + short(0x2E02, 9) + xy((0, 0), (70, 0), (70, 30), (0, 30), (0, 0)) + record(0x1100)
    + record(0x0900) + short(0x0D02, 40000) + short(0x0E02, 65535) + record(0x0F03, struct.pack(">i", -40)) + xy((0, 0), (500, 0), (500, 200)) + record(0x1100)
    + record(0x0800) + short(0x0D02, 4) + short(0x0E02, 0) + xy((0, 0), (0, 10), (10, 10)) + record(0x1100)
    + TAIL + bytes(1000))

(here / "expected.json").write_text(json.dumps(expected, indent=1) + "\n")
