"""Writes contour.csv: where the dose of the shots of dose.csv first crosses one half along 300 lines (scipy 1.17, ndtr and brentq).

    python make_contour.py     needs numpy and scipy; sigma is 10 nm
"""
import csv
import numpy as np, scipy
from scipy.optimize import brentq
from scipy.special import ndtr

rows = list(csv.reader(open('dose.csv')))[2:]
x0, y0, w, h, q = np.array([[float(v) for v in r[1:]] for r in rows if r[0] == 'shot']).T
SIGMA, RANGE, STEP = 10.0, 60.0, 0.05


def dose(x, y):
    fx = ndtr((x - x0) / SIGMA) - ndtr((x - x0 - w) / SIGMA)
    fy = ndtr((y - y0) / SIGMA) - ndtr((y - y0 - h) / SIGMA)
    return float((q * fx * fy).sum())


rng, lines = np.random.default_rng(11), []
while len(lines) < 300:
    x, y = np.round(rng.uniform(-60, 860, 2), 3)
    angle = round(rng.uniform(-np.pi, np.pi), 6)
    c, s = np.cos(angle), np.sin(angle)
    f = lambda t: dose(x + t * c, y + t * s) - 0.5
    # From a place that prints along the line, from one that does not against it.
    sense = 1.0 if f(0.0) >= 0 else -1.0
    near = 0.0
    while near < RANGE and (f(sense * (near + STEP)) >= 0) == (sense > 0):
        near += STEP
    if near + STEP < RANGE:
        root = brentq(f, sense * near, sense * (near + STEP), xtol=1e-12)
        # A crossing so flat or so near to another that a coarser look may pass it by is no question of accuracy.
        if all((f(root - sense * d) >= 0) == (sense > 0) and (f(root + sense * d) >= 0) != (sense > 0) for d in (0.5, 1, 2, 3)):
            lines.append((x, y, angle, root))
with open('contour.csv', 'w') as out:
    out.write(f'# scipy {scipy.__version__}, brentq on products of scipy.special.ndtr, sigma 10 nm\n')
    out.write('x_nm,y_nm,angle,distance_nm\n')
    for x, y, angle, root in lines:
        out.write(f'{x:.3f},{y:.3f},{angle:.6f},{root:.9f}\n')
