"""Holds a demo archive against its own known_answers.json, by NumPy, SciPy and h5py alone.

Usage: demo_reference.py FOLDER [--scores]

Prints a line for every check and ends with status 1 if one fails. Bounds: where the answers state a standard error,
4.5 of them; where not, as many standard errors of the mean over views, taken from the views' own scatter, as Student's
t has for the same probability; every other bound is derived beside its check. At 4.5 sigma a right archive fails one
check in 150,000.
--scores prints the scores of OPD_rms as JSON, for judging the stated standard errors over many seeds.
"""
import json
import pathlib
import sys

import h5py
import numpy as np
from scipy import signal, stats

SIGMAS = 4.5
failures = []


def check(name, holds, detail=""):
    print(("holds  " if holds else "FAILS  ") + name + ("  " + detail if detail else ""))
    if not holds:
        failures.append(name)


def near(name, got, expected, bound):
    check(name, abs(got - expected) <= bound, f"got {got:.6g}, expected {expected:.6g} within {bound:.2g}")


def mean_is_one(name, ratios):
    """Ratios of independent views: their mean is 1 within their own standard error."""
    ratios = np.asarray(ratios)
    if len(ratios) < 4:
        return
    errors = stats.t.isf(stats.norm.sf(SIGMAS), len(ratios) - 1)
    near(name, ratios.mean(), 1.0, errors * ratios.std(ddof=1) / np.sqrt(len(ratios)))


class View:
    """One file, in metres and seconds, only the points inside the aperture."""

    def __init__(self, folder, answer, rate):
        self.answer = answer
        self.tunnel = answer["unit"] == "um"
        with h5py.File(folder / answer["file"], "r") as f:
            self.attributes = dict(f.attrs)
            self.unit, self.sign = f["opd"].attrs["unit"], f["opd"].attrs["sign"]
            stored = f["opd"][:]
            self.x, self.y = f["x"][:], f["y"][:]
            self.inside = f["mask"][:] == 1 if "mask" in f else ~np.isnan(stored).all(axis=0)
            self.time = f["time"][:] if "time" in f else np.arange(len(stored)) / f.attrs["frame_rate_hz"]
            self.signals = {name: data[:].astype(float) for name, data in f["signals"].items()}
            self.layout = (f["opd"].chunks, f["opd"].compression_opts, f["opd"].shuffle, f["opd"].fletcher32)
        self.stored = stored
        self.rate = rate
        frames = stored[:, self.inside].astype(float) * (1e-6 if self.tunnel else 1.0)
        self.finite = np.isfinite(frames).all(axis=1)
        self.frames = frames[self.finite]
        columns, rows = np.meshgrid(self.x, self.y)
        self.px, self.py = columns[self.inside], rows[self.inside]
        self.planes = np.linalg.qr(np.stack([np.ones_like(self.px), self.px, self.py], axis=1))[0]

    def prepared(self, mean=True):
        """Piston and tilt taken out of every frame, and the mean frame if asked."""
        w = self.frames - (self.frames @ self.planes) @ self.planes.T
        return w - w.mean(axis=0) if mean else w

    def slopes(self):
        """Tip and tilt in rad, by least squares."""
        design = np.stack([np.ones_like(self.px), self.px, self.py], axis=1)
        return np.linalg.lstsq(design, self.frames.T, rcond=None)[0][1:]

    def column_signals(self, frames, column):
        """Series [rows of the column, time] of the points in a column of the grid."""
        return frames[:, np.isclose(self.px, self.x[column])].T

    @property
    def healthy(self):
        return "dead_patch" not in self.answer["flaws"]

    @property
    def even(self):
        return not self.answer["flaws"]


def check_layout(view, answers):
    name = view.answer["file"]
    a, c = view.attributes, answers["conditions"]
    same = all(a[key] == c[key] for key in (
        "mach", "velocity_m_s", "density_kg_m3", "temperature_k", "aperture_diameter_m", "reference_length_m",
        "wavelength_m", "gladstone_dale_m3_kg"))
    angles = a["azimuth_deg"] == view.answer["azimuth_deg"] and a["elevation_deg"] == view.answer["elevation_deg"]
    labels = a["campaign"] == answers["campaign"] and a["run"] == view.answer["run"]
    source = a["source"] == ("tunnel" if view.tunnel else "simulation")
    check(name + ": attributes", same and angles and labels and source and view.sign == 1
          and view.unit == view.answer["unit"])
    alpha = np.degrees(np.arccos(np.cos(np.radians(a["azimuth_deg"])) * np.cos(np.radians(a["elevation_deg"]))))
    check(name + ": look-back angle", abs(alpha - view.answer["alpha_deg"]) < 1e-9)
    # 2 nanometres below half the aperture are far less than the distance of any cell center from the rim.
    disc = np.hypot(*np.meshgrid(view.x, view.y)) <= c["aperture_diameter_m"] / 2 + 2e-9
    check(name + ": disc", (view.inside == disc).all() and view.inside.sum() == answers["grid"]["points_in_aperture"])
    kind = view.answer["storage"]
    stated = (tuple(kind["chunk"]) if "chunk" in kind else None, kind.get("deflate_level"), kind.get("shuffle", False),
              kind.get("fletcher32", False))
    check(name + ": storage", view.layout == stated, str(view.layout))


def check_flaws(view):
    name, flaws = view.answer["file"], view.answer["flaws"]
    steps = np.rint(np.diff(view.time) * view.rate).astype(int)
    gaps = [{"before_frame": int(i) + 1, "missing_frames": int(steps[i]) - 1} for i in np.flatnonzero(steps != 1)]
    check(name + ": gaps", gaps == flaws.get("gaps", []), str(gaps))
    bits = view.stored.view(np.uint32).reshape(len(view.stored), -1)
    nan = [int(i) for i in np.flatnonzero(~view.finite)]
    check(name + ": NaN frames", nan == flaws.get("nan_frames", []), str(nan))
    repeated = [int(i) + 1 for i in np.flatnonzero((bits[1:] == bits[:-1]).all(axis=1)) if view.finite[i]]
    check(name + ": repeated frames", repeated == flaws.get("repeated_frames", []), str(repeated))
    dead = np.zeros_like(view.inside)
    dead[view.inside] = np.ptp(view.frames, axis=0) == 0
    stated = np.zeros_like(dead)
    if patch := flaws.get("dead_patch"):
        stated[patch["first_row"]:patch["first_row"] + patch["rows"],
               patch["first_column"]:patch["first_column"] + patch["columns"]] = True
    check(name + ": dead points", (dead == stated).all(), f"{dead.sum()} of them")


def law(parameters, alpha):
    return parameters["low"] + parameters["rise"] / (
        1 + np.exp(-(alpha - parameters["center_deg"]) / parameters["width_deg"]))


def unit_energies(view, answers):
    """Residual mean squares of the random wavefront and of the roll-up for unit variance at a point: the twin of the
    program's Gram matrix, by projecting the sampled waves."""
    def residual(shape):
        return ((shape - view.planes @ (view.planes.T @ shape)) ** 2).mean()

    def pair(kx, ky):
        angle = kx * view.px + ky * view.py
        return residual(np.cos(angle)) + residual(np.sin(angle))

    waves = answers["random_wavefront"]["waves"]
    return (sum(w["share"] * pair(w["kx_rad_m"], w["ky_rad_m"]) for w in waves),
            pair(2 * np.pi / answers["roll_up"]["wavelength_m"], 0.0))


def check_rms(views, answers):
    laws = answers["angle_laws"]
    scores, with_mean = [], []
    for view in views:
        answer, expected = view.answer, view.answer["expected"]
        factor = 1.0 if view.tunnel else law(laws["simulation_factor"], answer["alpha_deg"])
        stated = factor * law(laws["flow_rms_m"], answer["alpha_deg"])
        check(answer["file"] + ": follows the angle law", abs(stated / answer["flow_rms_m"] - 1) < 1e-12)
        if expected is None:
            continue
        got = np.sqrt((view.prepared() ** 2).mean())
        # A few strong events make a short record's mean square skew: it is taken as log-normal with the stated mean
        # and standard error.
        mean = expected["opd_rms_overall_m"]
        spread = np.log1p((2 * expected["opd_rms_overall_standard_error_m"] / mean) ** 2)
        scores.append((2 * np.log(got / mean) + spread / 2) / np.sqrt(spread))
        check(answer["file"] + ": OPD_rms overall", abs(scores[-1]) < SIGMAS,
              f"got {got:.6g}, expected {mean:.6g}, score {scores[-1]:.2f}")
        # The cross term of lensing and fluctuation's mean scatters about 0, so the mean over views is what holds.
        with_mean.append((view.prepared(mean=False) ** 2).mean() / expected["opd_rms_overall_with_mean_m"] ** 2)
    mean_is_one("mean square with the steady lensing kept", with_mean)
    scores = np.array(scores)
    # If the standard errors are right, the squares of the scores follow chi-square.
    low, high = stats.chi2.isf([stats.norm.cdf(SIGMAS), stats.norm.sf(SIGMAS)], len(scores))
    check("scores of OPD_rms have the stated spread", low < (scores ** 2).sum() < high,
          f"sum of squares {(scores ** 2).sum():.1f} of {len(scores)}, between {low:.1f} and {high:.1f}")
    return scores


def check_tunnel(views, answers):
    tunnel = answers["tunnel"]
    views = [v for v in views if v.tunnel and v.healthy]
    for axis, name in enumerate(["tip", "tilt"]):
        ratios = [v.slopes()[axis].var() / v.answer["expected"][name + "_rms_rad"] ** 2 for v in views]
        mean_is_one(name + " variance", ratios)
    quiet = min((v for v in views if v.even), key=lambda v: v.answer["alpha_deg"])
    # At the highest frequencies the spectrum is noise, but for the tail of the flow's lines, which is known.
    frequency, density = signal.welch(quiet.prepared(), fs=quiet.rate, nperseg=256, axis=0)
    top = frequency > 0.4 * quiet.rate
    top[-1] = False  # a one-sided density holds half at its end
    got = np.sqrt((density.mean(axis=1)[top].mean() - random_density(quiet, answers, frequency)[top].mean())
                  * quiet.rate / 2)
    # Three of P degrees of freedom went with piston and tilt. A point, bin and segment without overlap give one
    # independent value each (Hann's overlap and its width in bins about cancel); 0.2 % for what the window leaks of the
    # flow and for the sensor's step.
    independent = len(quiet.px) * len(quiet.frames) / 256 * top.sum()
    near("sensor noise", got, tunnel["sensor_noise_m"] * np.sqrt(1 - 3 / len(quiet.px)),
         (SIGMAS * 0.5 / np.sqrt(independent) + 0.002) * tunnel["sensor_noise_m"])


def random_density(view, answers, frequency):
    """The stated one-sided PSD of the random wavefront, averaged over the aperture with piston and tilt removed: each
    wave is a complex second-order series with the poles a and b, turned by w0, whose line is
    c / |(1 - a exp(i (w - w0))) (1 - b exp(i (w - w0)))|^2."""
    random = answers["random_wavefront"]
    w = 2 * np.pi * frequency / view.rate
    a, b = (np.exp(-1 / (view.rate * memory)) for memory in random["forgetting_s"])
    c = (1 - a * a) * (1 - b * b) * (1 - a * b) / (1 + a * b) / view.rate

    def line(turn):
        return sum(c / np.abs((1 - a * np.exp(1j * (w - t))) * (1 - b * np.exp(1j * (w - t)))) ** 2
                   for t in (turn, -turn))

    def residual(kx, ky):
        angle = kx * view.px + ky * view.py
        return sum(((s - view.planes @ (view.planes.T @ s)) ** 2).mean() for s in (np.cos(angle), np.sin(angle)))

    flow = view.answer["flow_rms_m"] ** 2 * (1 - view.answer["roll_up_share"]) / unit_energies(view, answers)[0]
    return sum(flow * wave["share"] * residual(wave["kx_rad_m"], wave["ky_rad_m"])
               * line(wave["kx_rad_m"] * random["convective_speed_m_s"] / view.rate) for wave in random["waves"])


def mean_frequency(series, rate, near_hz):
    """Of a narrow line: the phase that the analytic signal gains per step, weighted with its energy."""
    band = signal.butter(2, [0.7 * near_hz, 1.3 * near_hz], "bandpass", fs=rate, output="sos")
    z = signal.hilbert(signal.sosfiltfilt(band, series))
    edge = len(z) // 10
    z = z[edge:-edge]
    return np.angle(np.vdot(z[:-1], z[1:])) * rate / (2 * np.pi)


def check_roll_up(views, answers):
    roll_up, c = answers["roll_up"], answers["conditions"]
    even = [v for v in views if v.even]
    strouhal = [mean_frequency(v.signals["surface_pressure"], v.rate, roll_up["frequency_hz"])
                * c["reference_length_m"] / c["velocity_m_s"] for v in even]
    mean_is_one("Strouhal number of the surface pressure", np.array(strouhal) / roll_up["strouhal"])
    looking_back = max(even, key=lambda v: v.answer["alpha_deg"])
    segment = min(1024, len(looking_back.frames) // 2)
    frequency, density = signal.welch(looking_back.prepared(), fs=looking_back.rate, nperseg=segment, axis=0)
    weighted = frequency * density.mean(axis=1)
    window = (frequency > 0.5 * roll_up["frequency_hz"]) & (frequency < 2 * roll_up["frequency_hz"])
    peak = frequency[window][np.argmax(weighted[window])]
    # One bin for the grid of frequencies, and twice the wander, for the peak of one noisy record lies within its line.
    width = 2 * roll_up["wander_hz"]
    near("peak of the wavefront's spectrum (Strouhal)", peak * c["reference_length_m"] / c["velocity_m_s"],
         roll_up["strouhal"], (looking_back.rate / segment + width) * c["reference_length_m"] / c["velocity_m_s"])


def check_speed(views, answers):
    """Phase slope of the cross-spectrum between two columns of points."""
    stated = answers["random_wavefront"]["convective_speed_m_s"]
    speeds = []
    for view in (v for v in views if not v.tunnel):
        across = len(view.x)
        left, right = across // 2 - max(1, across // 16), across // 2 + max(1, across // 16)
        rows = min(len(view.column_signals(view.frames, left)), len(view.column_signals(view.frames, right)))
        frames = view.frames - view.frames.mean(axis=0)
        upstream, downstream = (view.column_signals(frames, column) for column in (left, right))
        check(view.answer["file"] + ": columns have the same rows", len(upstream) == len(downstream) == rows)
        frequency, cross = signal.csd(upstream, downstream, fs=view.rate, nperseg=512)
        cross = cross.mean(axis=0)
        band = (frequency > 400) & (frequency < 2500)
        # SciPy's cross-spectrum is conj(X) Y: what arrives later downstream turns by -2 pi f dx / U.
        delay = -np.angle(cross[band]) / (2 * np.pi * frequency[band])
        weight = np.abs(cross[band]) * frequency[band] ** 2
        speeds.append((view.x[right] - view.x[left]) * weight.sum() / (weight * delay).sum())
    # A line of the waves is some 30 Hz wide, one of the roll-up 65 Hz, and both lend their phase to the neighbouring
    # bins of 100 Hz, at 1 to 2 kHz where the weight lies: 1 % at most; the mean over views adds its scatter.
    near("convective speed (m/s)", np.mean(speeds), stated,
         0.01 * stated + SIGMAS * np.std(speeds) / np.sqrt(len(speeds)))


def check_signals(views, answers):
    pressure, accelerometer = answers["signals"]["surface_pressure"], answers["signals"]["accelerometer"]
    even = [v for v in views if v.even]
    mean_is_one("surface pressure variance", [v.signals["surface_pressure"].var() / pressure["rms"] ** 2 for v in even])
    half_period = int(0.5 * even[0].rate / answers["roll_up"]["frequency_hz"])
    lags = np.arange(pressure["lead_frames"] - half_period, pressure["lead_frames"] + half_period + 1)
    total = np.zeros(len(lags))
    for view in (v for v in even if not v.tunnel):
        distance = np.hypot(view.px, view.py)
        center = distance < distance.min() * 1.001  # one point, or the four about the axis
        w = view.frames[:, center].mean(axis=1)
        w -= w.mean()
        p = view.signals["surface_pressure"] - view.signals["surface_pressure"].mean()
        total += [np.mean(p[max(0, -lag):len(p) - max(0, lag)] * w[max(0, lag):len(w) + min(0, lag)])
                  / (w.std() * p.std()) for lag in lags]
    best = int(np.argmax(total))
    best = min(max(best, 1), len(lags) - 2)
    a, b, c = total[best - 1:best + 2]
    lag = lags[best] + 0.5 * (a - c) / (a - 2 * b + c)
    # The random wavefront does not know the pressure, but has the same frequencies: with the roll-up's share of a third
    # or more its noise turns the phase by at most 1 / sqrt(2 x 20 independent periods), one frame in forty.
    near("lead of the surface pressure (frames)", lag, pressure["lead_frames"], 1.0)

    tunnel = answers["tunnel"]
    jittery = [v for v in even if v.tunnel]
    mean_is_one("accelerometer variance",
                [v.signals["accelerometer"].var() / accelerometer["rms"] ** 2 for v in jittery])
    share = np.hypot(tunnel["jitter_rad"], tunnel["vibration_rad"])
    correlations = [np.corrcoef(v.signals["accelerometer"], v.slopes()[0])[0, 1] * v.slopes()[0].std() / share
                    for v in jittery]
    mean_is_one("accelerometer's correlation with the tip", np.array(correlations)
                / accelerometer["correlation_with_tip_jitter"])
    lines = []
    for view in jittery:
        s = view.signals["accelerometer"]
        frequency, density = signal.periodogram(s, fs=view.rate, window="hann")
        window = (frequency > 250) & (frequency < 800)
        lines.append(frequency[window][np.argmax(density[window])])
    near("vibration line (Hz)", np.median(lines), tunnel["vibration_hz"], jittery[0].rate / len(jittery[0].time))


def main():
    folder = pathlib.Path(sys.argv[1])
    answers = json.loads((folder / "known_answers.json").read_text())
    rate = answers["conditions"]["frame_rate_hz"]
    views = [View(folder, answer, rate) for answer in answers["views"]]
    for view in views:
        check_layout(view, answers)
        check_flaws(view)
    scores = check_rms(views, answers)
    check_tunnel(views, answers)
    check_roll_up(views, answers)
    check_speed(views, answers)
    check_signals(views, answers)
    if "--scores" in sys.argv:
        print(json.dumps(list(scores)))
    print(f"{len(failures)} checks failed")
    sys.exit(1 if failures else 0)


main()
