"""Holds what indexing keeps of a view against NumPy, straight from the definitions and in double precision.

    summary_reference.py FILE FOLDER

FILE is a wavefront file in the project's layout, FOLDER what was kept of it. Modes: Zernike polynomials by the explicit sum
of R. J. Noll, J. Opt. Soc. Am. 66 (1976) 207, equations 1 and 2, in his order, made orthonormal over the points in
that order (Gram-Schmidt, by QR). Neither the disc's radius nor its center matters then: all polynomials of lower degree
come before.
"""

import json
import math
import pathlib
import sys

import h5py
import numpy as np

path, folder = sys.argv[1], pathlib.Path(sys.argv[2])


def kept(name):
    return np.load(folder / f"{name}.npy")


def noll(j):
    """Radial order and azimuthal frequency; negative: the sine."""
    n = 0
    while (n + 1) * (n + 2) // 2 < j:
        n += 1
    k = j - n * (n + 1) // 2 - 1
    m = 2 * ((k + 1) // 2) if n % 2 == 0 else 2 * (k // 2) + 1
    return n, m if m == 0 or j % 2 == 0 else -m


def zernike(j, rho, theta):
    n, m = noll(j)
    a = abs(m)
    radial = sum((-1) ** s * math.factorial(n - s) * rho ** (n - 2 * s)
                 / (math.factorial(s) * math.factorial((n + a) // 2 - s) * math.factorial((n - a) // 2 - s))
                 for s in range((n - a) // 2 + 1))
    return radial * (np.cos(a * theta) if m >= 0 else np.sin(a * theta))


def hold(name, ours, theirs, scale, tolerance):
    ours, theirs = np.asarray(ours, float), np.asarray(theirs, float)
    assert ours.shape == theirs.shape, f"{name}: {ours.shape} where NumPy has {theirs.shape}"
    difference = float(np.max(np.abs(ours - theirs), initial=0.0)) / scale
    print(f"{name:26s} {difference:.1e}")
    assert difference <= tolerance, f"{name} differs by {difference:.2e}, more than {tolerance:.0e}"


with h5py.File(path) as file:
    opd = file["opd"][...].astype(float) * {"m": 1.0, "um": 1e-6}[file["opd"].attrs["unit"]]
    mask = file["mask"][...] != 0 if "mask" in file else np.ones(opd.shape[1:], bool)
    x, y = np.meshgrid(file["x"][...], file["y"][...])
says_something = np.isfinite(opd).any(axis=(1, 2))
mask &= np.isfinite(opd[says_something]).mean(axis=0) >= 0.5
assert (kept("native_mask") == mask).all(), "the native mask differs"
opd, x, y = opd[:, mask], x[mask], y[mask]
finite = np.isfinite(opd).all(axis=1)
assert (kept("finite") == finite).all(), "other frames are finite"

shape = json.loads((folder / "summary.json").read_text())
modes, points = shape["modes"], len(x)
assert modes == 36 and shape["points"] == points and shape["frames"] == len(opd)
scale_m = max(np.ptp(x), np.ptp(y)) / 2
rho, theta = np.hypot(x, y) / scale_m, np.arctan2(y, x)
q, r = np.linalg.qr(np.column_stack([zernike(j, rho, theta) for j in range(1, modes + 1)]))
basis = q * np.sign(np.diag(r)) * np.sqrt(points)

opd[~finite] = 0.0
piston = opd.mean(axis=1)
coefficients = (opd - piston[:, None]) @ basis / points
coefficients[:, 0] = piston
residual = opd - coefficients @ basis.T
untilted = opd - coefficients[:, :3] @ basis[:, :3].T
steady = untilted[finite].mean(axis=0)
mean_coefficients = coefficients[finite].mean(axis=0)
mean_residual = residual[finite].mean(axis=0)

# A frame is rounded to float about its first value: 2^-24 of its 4 um of tilt in the points, 2e-13 m, which the mean over
# 300 points brings down again. Products with the modes run in float: 2^-24 of their size at every sum, at random. So
# coefficients and mean squares are good to some 1e-6 of the ripple's; ten times that is allowed.
ripple = np.sqrt((untilted[finite] ** 2).mean())
hold("coefficients of the ripple", kept("coefficients")[3:], coefficients.T[3:], ripple, 1e-5)
hold("tip and tilt", kept("coefficients")[1:3], coefficients.T[1:3], np.abs(coefficients[:, 1:3]).max(), 1e-6)
hold("piston", kept("coefficients")[0], piston, np.abs(piston).max(), 1e-8)
hold("mean coefficients", kept("mean_coefficients")[3:], mean_coefficients[3:], ripple, 1e-5)
hold("tilt_removed", kept("tilt_removed"), (untilted**2).mean(axis=1), ripple**2, 1e-5)
hold("residual", kept("residual"), (residual**2).mean(axis=1), ripple**2, 1e-5)
hold("steady_lensing", kept("steady_lensing"), steady, ripple, 1e-5)
fluctuation = np.where(finite[:, None], untilted - steady, 0.0)
hold("tilt_removed_fluctuation", kept("tilt_removed_fluctuation"), (fluctuation**2).mean(axis=1), ripple**2, 1e-5)
fluctuation = np.where(finite[:, None], residual - mean_residual, 0.0)
hold("residual_fluctuation", kept("residual_fluctuation"), (fluctuation**2).mean(axis=1), ripple**2, 1e-5)

# The tree: each block, and behind it the nodes that it completes.
block_frames = shape["block_frames"]
expected = []
for block in range(shape["blocks"]):
    reach = 1
    while True:
        frames = slice((block + 1 - reach) * block_frames, (block + 1) * block_frames)
        expected.append(untilted[frames][finite[frames]])
        if (block + 1) % (2 * reach) != 0:
            break
        reach *= 2
assert (kept("node_count") == [len(frames) for frames in expected]).all(), "nodes hold other frames"
hold("node_mean", kept("node_mean"), [frames.mean(axis=0) for frames in expected], ripple, 1e-5)
hold("node_m2", kept("node_m2"), [((frames - frames.mean(axis=0)) ** 2).sum(axis=0) for frames in expected],
     ripple**2 * max(len(frames) for frames in expected), 1e-5)
