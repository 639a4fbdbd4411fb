"""Writes a large GDSII file and its compressed OASIS twin, and says how long gdstk takes to read them and in how much memory.

    python make_large.py mixed 99 /tmp/large      rectangles and small blobs in one cell, about 99 MB of GDSII
    python make_large.py curved 99 /tmp/large     outlines of 40 to 200 points
    python make_large.py cells 990 /tmp/large     200 cells side by side

Same arguments, same figures. For the ratios, read both files with `shotwright` in the same minutes on the same machine.
"""
import resource, subprocess, sys, time
import gdstk, numpy as np

PITCH = 1_000_000


def rectangles(cell, n, rng):
    corners, sides = rng.integers(0, PITCH, (n, 2)), rng.integers(40, 500, (n, 2))
    for (x, y), (w, h) in zip(corners.tolist(), sides.tolist()):
        cell.add(gdstk.rectangle((x, y), (x + w, y + h), layer=1))


def blobs(cell, n, least, most, rng):
    for _ in range(n):
        m = int(rng.integers(least, most))
        t = np.arange(m) * 2 * np.pi / m
        r = 100 + 2.4 * m + 20 * np.sin(3 * t + rng.random() * 6) + 10 * np.sin(5 * t + rng.random() * 6)
        x, y = rng.integers(0, PITCH, 2)
        cell.add(gdstk.Polygon(np.column_stack([np.round(x + r * np.cos(t)), np.round(y + r * np.sin(t))]), layer=1))


def make(kind, megabytes, out):
    rng = np.random.default_rng(7)
    lib = gdstk.Library(unit=1e-9, precision=1e-9)
    if kind == "curved":
        blobs(lib.new_cell("TOP"), int(megabytes * 1e6 / 992), 40, 200, rng)
    else:
        cells = 200 if kind == "cells" else 1
        each = int(megabytes * 1e6 / 240 / cells)
        made = [lib.new_cell(f"C{i}") for i in range(cells)]
        for cell in made:
            rectangles(cell, each, rng)
            blobs(cell, each, 6, 30, rng)
        top = lib.new_cell("TOP")
        for i, cell in enumerate(made):
            top.add(gdstk.Reference(cell, (PITCH * (i % 20), PITCH * (i // 20))))
    lib.write_gds(out + ".gds", max_points=0)
    lib.write_oas(out + ".oas", compression_level=6)


if len(sys.argv) == 2:
    wall, cpu = time.time(), time.process_time()
    (gdstk.read_gds if sys.argv[1].endswith(".gds") else gdstk.read_oas)(sys.argv[1])
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"{sys.argv[1]}: {time.time() - wall:.2f} s, {time.process_time() - cpu:.2f} s of CPU, {peak:.0f} MB")
else:
    make(sys.argv[1], float(sys.argv[2]), sys.argv[3])
    for ending in (".gds", ".oas"):
        subprocess.run([sys.executable, __file__, sys.argv[3] + ending], check=True)
