#!/usr/bin/python3
"""Writes a small archive of wavefront files with h5py: good ones in several storage kinds, one with every fault that a
check should find, and some that must be refused or passed over.

    make_archive.py FOLDER

Frames hold a piston of 50 um, a jitter of 2 um, a steady lensing of 0.2 um and a ripple of 0.1 um.
"""

import pathlib
import sys

import h5py
import numpy as np

FRAMES, ROWS, COLUMNS = 300, 20, 22
folder = pathlib.Path(sys.argv[1])
x = (np.arange(COLUMNS) - (COLUMNS - 1) / 2) * 0.005
y = (np.arange(ROWS) - (ROWS - 1) / 2) * 0.005
radius = np.hypot(*np.meshgrid(x, y)) / 0.05
inside = (radius <= 1.0) & (radius >= 0.2)


def frames_m(seed):
    """Frames [frames, rows, columns] in metres, everywhere on the grid."""
    random = np.random.default_rng(seed)
    across, along = np.meshgrid(x / 0.05, y / 0.05)
    t = np.arange(FRAMES)[:, None, None]
    opd = 5e-5 + 1e-6 * random.standard_normal((FRAMES, 1, 1))
    opd = opd + 2e-6 * np.sin(0.31 * t) * across + 2e-6 * np.cos(0.17 * t) * along
    opd = opd + 2e-7 * (across**3 - 2 * along**2 + across * along)
    for _ in range(6):
        kx, ky, speed, phase = random.standard_normal(4) * (6, 6, 0.7, 3)
        opd = opd + 4e-8 * np.sin(kx * across + ky * along + speed * t + phase)
    return opd + 2e-8 * random.standard_normal(opd.shape)


def write(name, opd, unit="m", attributes=None, time=None, mask=True, **storage):
    path = folder / name
    path.parent.mkdir(parents=True, exist_ok=True)
    with h5py.File(path, "w") as file:
        dataset = file.create_dataset("opd", data=opd, **storage)
        dataset.attrs["unit"] = unit
        file["x"], file["y"] = x, y
        if mask:
            file["mask"] = inside.astype("u1")
        if time is not None:
            file["time"] = time
        values = dict(campaign="Wall dome", run="M05 tunnel", source="tunnel", azimuth_deg=90.0, elevation_deg=30.0,
                      aperture_diameter_m=0.1, frame_rate_hz=25e3, mach=0.5, velocity_m_s=170.0, density_kg_m3=1.1,
                      temperature_k=288.0, wavelength_m=1e-6, reference_length_m=0.2, note="a note")
        values.update(attributes or {})
        for key, value in values.items():
            if value is not None:
                file.attrs[key] = value


write("tunnel/plain.h5", frames_m(1).astype("f4"))
write("tunnel/deflated.h5", frames_m(2).astype("f4"), attributes=dict(azimuth_deg=120.0), chunks=(7, ROWS, COLUMNS),
      compression=4, shuffle=True)
write("simulation/double.h5", 1e6 * frames_m(3), unit="um",
      attributes=dict(run="M05 simulation", source="simulation", azimuth_deg=97.5))
outside_nan = frames_m(4)
outside_nan[:, ~inside] = np.nan
write("simulation/nan.h5", outside_nan.astype("f4"), mask=False, chunks=(50, 10, 11),
      attributes=dict(run="M05 simulation", source="simulation", azimuth_deg=-60.0))

# Faults: frames 20 to 22 and 250 hold NaN, frame 40 repeats 39, a patch is dead, the clock jumps by four steps once.
faulty = frames_m(5).astype("f4")
faulty[40] = faulty[39]
faulty[:, 4:7, 9:12] = 5e-5
faulty[20:23, 5, 5] = np.nan
faulty[250] = np.nan
time = np.arange(FRAMES) / 25e3
time[100:] += 4 / 25e3
write("tunnel/faulty.h5", faulty, time=time, attributes=dict(frame_rate_hz=None, azimuth_deg=150.0))

(folder / "broken").mkdir()
(folder / "broken/text.h5").write_text("this is not HDF5\n")
(folder / "broken/empty.hdf5").write_bytes(b"")
whole = (folder / "tunnel/deflated.h5").read_bytes()
(folder / "broken/cut.h5").write_bytes(whole[: len(whole) // 2])
(folder / "readme.txt").write_text("not a wavefront\n")
(folder / ".hidden.h5").write_bytes(whole)
