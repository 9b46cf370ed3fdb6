"""Holds the program's answers against NumPy, on every view of a small archive.

    statistics_reference.py PROGRAM ARCHIVE STATE

The archive is indexed already. Each question is asked with `PROGRAM query` and answered here by h5py and NumPy in double
precision, straight from the definitions: least-squares plane, time mean, root mean squares. Prints one line per view and
ends with an error when a figure differs by more than the tolerance stated beside it.
"""

import json
import os
import subprocess
import sys

import h5py
import numpy as np

program, archive, state = sys.argv[1:4]
worst = {}


def ask(view, analysis, *parameters):
    """One answer of the program, as JSON."""
    command = [program, "query", view, analysis, *parameters, "--archive", archive, "--state", state]
    return json.loads(subprocess.run(command, check=True, capture_output=True).stdout)


def array(result, name):
    entry = result["arrays"][name]
    data = [np.nan if value is None else value for value in entry["data"]]
    return np.array(data, dtype=float).reshape(entry["shape"])


def frames_of(path):
    """Frames in micrometres [frames, points] of the points with light, their x and y, and the mask."""
    with h5py.File(path) as file:
        dataset = file["/opd"]
        scale = {"m": 1e6, "um": 1.0}[dataset.attrs["unit"]] * float(dataset.attrs.get("sign", 1))
        opd = dataset[...].astype(float) * scale
        mask = file["/mask"][...] != 0 if "/mask" in file else np.ones(opd.shape[1:], bool)
        x, y = np.meshgrid(file["/x"][...], file["/y"][...])
    mask &= np.isfinite(opd).mean(axis=0) >= 0.5
    return opd[:, mask], x[mask], y[mask], mask


def fitted(columns, frames):
    """What least squares on `columns` [points, modes] finds in `frames`."""
    q, _ = np.linalg.qr(columns)
    return (frames @ q) @ q.T


def hold(name, ours, theirs, tolerance):
    difference = float(np.max(np.abs(np.asarray(ours) - np.asarray(theirs)) / np.max(np.abs(theirs))))
    worst[name] = max(worst.get(name, 0.0), difference)
    assert difference <= tolerance, f"{name}: differs by {difference:.2e}, more than {tolerance:.0e}"


def check(view, path):
    opd, x, y, mask = frames_of(path)
    finite = np.isfinite(opd).all(axis=1)
    good = opd[finite]
    plane = np.column_stack([np.ones_like(x), x, y])

    # The default: piston, tilt and the steady lensing removed. Frames are floats of about 1 um with a ripple of 0.05 um:
    # a float step of the first is 1e-6 of the second, at random over points; the rms feels it in second order.
    prepared = good - fitted(plane, good)
    steady = prepared.mean(axis=0)
    prepared -= steady
    rms = np.sqrt((prepared**2).mean(axis=1))
    result = ask(view, "statistics")
    values = {name: entry["value"] for name, entry in result["values"].items()}
    hold("opd_rms_mean", values["opd_rms_mean"], rms.mean(), 1e-5)
    hold("opd_rms_std", values["opd_rms_std"], rms.std(ddof=1), 1e-4)
    hold("opd_rms_overall", values["opd_rms_overall"], np.sqrt((prepared**2).mean()), 1e-5)
    hold("percentiles", array(result, "percentiles"), np.percentile(rms, array(result, "percent")), 1e-5)
    hold("rms_map", array(result, "rms_map")[mask], np.sqrt((prepared**2).mean(axis=0)), 1e-4)
    hold("mean_map", array(result, "mean_map")[mask], steady, 1e-4)

    # Any window, from the summary and its edges; the steady lensing stays that of the record.
    first, last = len(opd) // 7, len(opd) // 2 + 3
    within = prepared[finite[:first].sum() : finite[: last + 1].sum()]
    windowed = ask(view, "statistics", f"first={first}", f"last={last}")
    hold("window opd_rms_mean", windowed["values"]["opd_rms_mean"]["value"],
         np.sqrt((within**2).mean(axis=1)).mean(), 1e-5)
    hold("window rms_map", array(windowed, "rms_map")[mask], np.sqrt((within**2).mean(axis=0)), 1e-4)

    # A smaller, obscured aperture: the frames themselves.
    radius = np.hypot(x - (x.min() + x.max()) / 2, y - (y.min() + y.max()) / 2)
    outer = 0.4 * result_diameter(result, x, y)
    inside = (radius <= outer * (1 + 1e-9)) & (radius >= 0.3 * outer * (1 - 1e-9))
    cut = good[:, inside]
    cut = cut - fitted(plane[inside], cut)
    cut -= cut.mean(axis=0)
    smaller = ask(view, "statistics", f"aperture={2 * outer!r}", "obscuration=0.3")
    assert smaller["provenance"]["source"] == "frames"
    hold("cut opd_rms_mean", smaller["values"]["opd_rms_mean"]["value"], np.sqrt((cut**2).mean(axis=1)).mean(), 1e-5)

    # Nothing removed but piston: the plane stays in.
    raw = good - good.mean(axis=1, keepdims=True)
    tilted = ask(view, "statistics", "remove=piston")
    hold("remove=piston", tilted["values"]["opd_rms_mean"]["value"], np.sqrt((raw**2).mean(axis=1)).mean(), 1e-5)

    # One frame, as it is.
    single = ask(view, "frames", "first=5", "last=5", "remove=piston,tilt")
    if finite[5]:
        frame = opd[5] - fitted(plane, opd[5:6])[0]
        hold("frames", array(single, "frames")[0][mask], frame, 1e-4)


def result_diameter(result, x, y):
    """The measured diameter, as the program defines it: the farthest point plus half a grid step, twice."""
    grid = array(result, "x")
    step = (grid[-1] - grid[0]) / (len(grid) - 1)
    center_x, center_y = (x.min() + x.max()) / 2, (y.min() + y.max()) / 2
    return 2 * (np.hypot(x - center_x, y - center_y).max() + step / 2)


count = 0
for folder, _, names in sorted(os.walk(archive)):
    for name in sorted(names):
        if not name.endswith(".h5"):
            continue
        path = os.path.join(folder, name)
        azimuth, elevation = name[:-3].split("_")
        check(f"{os.path.basename(folder)}-{azimuth}-{elevation}", path)
        count += 1
assert count > 0, "no files were checked"
print(f"{count} views agree with NumPy; greatest relative differences:")
for name, difference in worst.items():
    print(f"  {name:24s} {difference:.1e}")
