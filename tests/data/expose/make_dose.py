"""Writes dose.csv: doses of a small shot list at scattered places, by products of scipy.special.ndtr (scipy 1.17).

    python make_dose.py        needs numpy and scipy; sigma is 10 nm
"""
import numpy as np, scipy
from scipy.special import ndtr

sigma, rng = 10.0, np.random.default_rng(20240607)
x0, y0 = rng.integers(0, 600, (2, 60)).astype(float)
w, h = rng.integers(8, 220, (2, 60)).astype(float)
dose = np.round(rng.uniform(0.6, 1.6, 60), 3)
px, py = np.round(rng.uniform(-60, 860, (2, 400)), 3)
total = np.zeros(400)
for a, b, c, d, q in zip(x0, y0, w, h, dose):
    total += q * (ndtr((px - a) / sigma) - ndtr((px - a - c) / sigma)) * (ndtr((py - b) / sigma) - ndtr((py - b - d) / sigma))
with open('dose.csv', 'w') as f:
    f.write(f'# scipy {scipy.__version__}, products of scipy.special.ndtr, sigma 10 nm\n')
    f.write('kind,x_nm,y_nm,w_nm,h_nm,dose\n')
    for r in zip(x0, y0, w, h, dose):
        f.write('shot,%g,%g,%g,%g,%g\n' % r)
    for r in zip(px, py, total):
        f.write('place,%.3f,%.3f,,,%.15g\n' % r)
