"""Refits one strike with SciPy's least squares and prints f in Hz and decay in 1/s of each mode.

usage: least_squares.py SAMPLES RATE F DECAY [F DECAY ...]
SAMPLES: raw float32, the fitted window. F, DECAY: where to start. Model: the sum of damped
sinusoids, amplitudes solved for at every step, so that only poles are varied (SciPy's
optimize.least_squares, method "trf", with the Jacobian of the full model).
"""
import sys

import numpy as np
from scipy.optimize import least_squares

samples = np.fromfile(sys.argv[1], dtype=np.float32).astype(float)
rate = float(sys.argv[2])
start = np.array([float(word) for word in sys.argv[3:]]).reshape(-1, 2)
t = np.arange(samples.size) / rate
count = start.shape[0]


def terms(parameters):
    poles = parameters.reshape(count, 4)
    envelope = np.exp(-np.outer(poles[:, 1], t))
    angle = 2 * np.pi * np.outer(poles[:, 0], t)
    return poles, envelope * np.cos(angle), envelope * np.sin(angle)


def residual(parameters):
    poles, cosine, sine = terms(parameters)
    return poles[:, 2] @ cosine + poles[:, 3] @ sine - samples


def jacobian(parameters):
    poles, cosine, sine = terms(parameters)
    columns = []
    for k in range(count):
        ring = poles[k, 2] * cosine[k] + poles[k, 3] * sine[k]
        turned = -poles[k, 2] * sine[k] + poles[k, 3] * cosine[k]
        columns += [2 * np.pi * t * turned, -t * ring, cosine[k], sine[k]]
    return np.array(columns).T


_, cosine, sine = terms(np.column_stack([start, np.zeros((count, 2))]).ravel())
amplitudes, *_ = np.linalg.lstsq(np.vstack([cosine, sine]).T, samples, rcond=None)
first = np.column_stack([start, amplitudes[:count], amplitudes[count:]]).ravel()
found = least_squares(residual, first, jacobian, method="trf", x_scale="jac", xtol=1e-15,
                      ftol=1e-15, gtol=1e-15, max_nfev=200)
for f, decay, _, _ in found.x.reshape(count, 4):
    print(f"{f:.12g} {decay:.12g}")
