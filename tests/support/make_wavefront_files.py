#!/usr/bin/python3
"""Writes small wavefront files in every storage kind, and files that must be refused, with h5py.

    make_wavefront_files.py FOLDER [NAME…]

With names, only those are written. Beside each readable NAME.h5 lies NAME.npy: what NumPy makes of it, in metres,
float64 [frames, rows, columns].
manifest.json lists {"name", "layout": what differs from the default, "refused": code, "says": part of the text}.
"""

import ctypes
import json
import pathlib
import sys

import h5py
import numpy as np

FRAMES, ROWS, COLUMNS = 23, 12, 10
folder = pathlib.Path(sys.argv[1])
wanted = set(sys.argv[2:])
manifest = []
random = np.random.default_rng(20240607)


def field(frames=FRAMES, rows=ROWS, columns=COLUMNS):
    """Ripple of 0.1 um on a piston of some 100 um: what a careless float32 difference would lose."""
    piston = 1e-4 * (1 + random.random((frames, 1, 1)))
    return piston + 1e-7 * random.standard_normal((frames, rows, columns))


def attributes(file, **others):
    values = dict(campaign="kiosk", run="m05", source="tunnel", azimuth_deg=90.0, elevation_deg=30.0,
                  aperture_diameter_m=0.2, frame_rate_hz=25e3, mach=0.5)
    values.update(others)
    for name, value in values.items():
        if value is not None:
            file.attrs[name] = value


def layout_entry(name, layout=None, refused=None, says=None):
    manifest.append({"name": name, "layout": layout or {}, "refused": refused, "says": says})


def expected(dataset, unit=1.0, sign=1, scale=1.0, offset=0.0, missing=None, axes=(0, 1, 2)):
    """From the bytes as h5py reads them, by the contract's formula."""
    stored = dataset[...].astype("f8")
    metres = sign * (stored * scale + offset) * unit
    if missing is not None:
        metres[stored == missing] = np.nan
    return np.ascontiguousarray(metres.transpose(axes))


def good(name, make, layout=None, libver="earliest", userblock=None, attrs=None, path="/opd", **how):
    if wanted and name not in wanted:
        return
    with h5py.File(folder / f"{name}.h5", "w", libver=libver, userblock_size=userblock) as file:
        attributes(file, **(attrs or {}))
        make(file)
        np.save(folder / f"{name}.npy", expected(file[path], **how))
    layout_entry(name, layout)


def refused(name, code, says, make, layout=None, libver="earliest", attrs=None):
    if wanted and name not in wanted:
        return
    with h5py.File(folder / f"{name}.h5", "w", libver=libver) as file:
        attributes(file, **(attrs or {}))
        make(file)
    layout_entry(name, layout, code, says)


def opd(file, data=None, unit="m", name="opd", **how):
    dataset = file.create_dataset(name, data=field() if data is None else data, **how)
    if unit is not None:
        dataset.attrs["unit"] = unit
    return dataset


def low_level(file, dcpl, dtype, data, maxshape=None):
    """A dataset with creation properties that h5py's own call does not offer."""
    space = h5py.h5s.create_simple(data.shape, maxshape or data.shape)
    dataset = h5py.Dataset(h5py.h5d.create(file.id, b"opd", h5py.h5t.py_create(np.dtype(dtype)), space, dcpl))
    dataset.attrs["unit"] = "m"
    return dataset


def element_types():
    scaled = {"i2": 2e-8, "i4": 3e-13}
    for order in "<>":
        for kind in ("f4", "f8", "i2", "i4"):
            for storage, how in (("plain", {}), ("chunks", dict(chunks=(4, 12, 10), shuffle=True, compression=4))):
                scale = scaled.get(kind, 1.0)
                data = field() if kind[0] == "f" else np.rint((field() - 1.5e-4) / scale)

                def make(file, data=data, dtype=order + kind, how=how, scale=scale):
                    dataset = opd(file, data.astype(dtype), **how)
                    if scale != 1.0:
                        dataset.attrs["scale"] = scale
                        dataset.attrs["offset"] = 1.5e-4

                name = f"type_{'le' if order == '<' else 'be'}_{kind}_{storage}"
                good(name, make, scale=scale, offset=1.5e-4 if scale != 1.0 else 0.0)


def chunk_shapes():
    filters = {"none": {}, "deflate": dict(compression=6), "both": dict(compression=1, shuffle=True),
               "sum": dict(fletcher32=True), "all": dict(compression=9, shuffle=True, fletcher32=True)}
    for libver in ("earliest", "latest"):
        for chunk in ((1, 12, 10), (8, 12, 10), (5, 7, 4), (23, 12, 10), (23, 1, 1), (3, 12, 3)):
            for label, how in filters.items():
                name = f"chunk_{libver}_{'x'.join(map(str, chunk))}_{label}"
                good(name, lambda f, c=chunk, h=how: opd(f, field().astype("f4"), chunks=c, **h), libver=libver)
        for label, maxshape in (("one", (None, ROWS, COLUMNS)), ("three", (None, None, None))):
            good(f"unlimited_{libver}_{label}",
                 lambda f, m=maxshape: opd(f, field().astype("f4"), chunks=(9, 5, 7), maxshape=m, compression=3),
                 libver=libver)


def early(file):
    dcpl = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    dcpl.set_chunk((4, 5, 6))
    dcpl.set_alloc_time(h5py.h5d.ALLOC_TIME_EARLY)
    data = field()
    low_level(file, dcpl, "f8", data)[...] = data


def larger_than_the_data(file):
    dcpl = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    dcpl.set_chunk((40, 5, 16))
    data = field()
    low_level(file, dcpl, "f4", data, (h5py.h5s.UNLIMITED,) * 3)[...] = data


def edges_unfiltered(file):
    # H5Pset_chunk_opts(H5D_CHUNK_DONT_FILTER_PARTIAL_CHUNKS) is not in h5py; the library it has loaded has it.
    library = next(line.split()[-1] for line in open("/proc/self/maps") if "libhdf5_serial.so" in line)
    dcpl = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    dcpl.set_chunk((4, 12, 10))
    dcpl.set_deflate(4)
    assert ctypes.CDLL(library).H5Pset_chunk_opts(ctypes.c_int64(dcpl.id), ctypes.c_uint(2)) >= 0
    data = field()
    low_level(file, dcpl, "f8", data)[...] = data


def checksum_first(file):
    dcpl = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    dcpl.set_chunk((4, 5, 6))
    dcpl.set_fletcher32()
    dcpl.set_shuffle()
    dcpl.set_deflate(4)
    data = field()
    low_level(file, dcpl, "f4", data)[...] = data


def skipped_filter(file):
    data = field().astype("<f4")
    dataset = opd(file, data, chunks=(1, 12, 10), shuffle=True, compression=4)
    dataset.id.write_direct_chunk((3, 0, 0), data[4].tobytes(), filter_mask=3)
    shuffled = data[5].reshape(-1).view("u1").reshape(-1, 4).T.tobytes()
    dataset.id.write_direct_chunk((4, 0, 0), shuffled, filter_mask=2)


def with_holes(fill):
    def make(file):
        dataset = opd(file, None if fill is None else field()[:0].astype("f4"), chunks=(2, 6, 10), compression=2,
                      maxshape=(None, ROWS, COLUMNS), fillvalue=fill)
        dataset.resize(FRAMES, axis=0)
        dataset[4:7, :, :] = field(3)
        dataset[11, 0:6, :] = field(1)[0, 0:6]
    return make


def storage():
    good("early_old", early)
    good("early_implicit", early, libver="latest")
    good("larger_than_the_data", larger_than_the_data)
    good("larger_than_the_data_latest", larger_than_the_data, libver="latest")
    good("edges_unfiltered", edges_unfiltered, libver="latest")
    good("checksum_first", checksum_first)
    good("skipped_filter", skipped_filter)
    good("holes_zero", with_holes(0.0))
    good("holes_nan", with_holes(np.nan), libver="latest")
    good("holes_value", with_holes(7e-5))
    good("user_block", opd, userblock=1024)
    good("user_block_chunks", lambda f: opd(f, chunks=(4, 5, 6)), userblock=512, libver="latest")
    good("one_frame", lambda f: opd(f, field(1)))
    good("large_frame", lambda f: opd(f, field(3, 210, 190)))
    good("large_frame_chunks", lambda f: opd(f, field(3, 210, 190), chunks=(1, 210, 190)))
    good("large_frame_deflate", lambda f: opd(f, field(3, 210, 190), chunks=(2, 100, 190), compression=1))


def soft_link(file):
    opd(file, name="/inside/frames")
    file["opd"] = h5py.SoftLink("/inside/frames")


def values():
    for unit, factor in (("um", 1e-6), ("\u00b5m", 1e-6), ("\u03bcm", 1e-6), ("mm", 1e-3), ("nm", 1e-9)):
        name = {"\u00b5m": "micro", "\u03bcm": "mu"}.get(unit, unit)
        good(f"unit_{name}", lambda f, u=unit, k=factor: opd(f, (field() / k).astype("f4"), unit=u), unit=factor)
    good("unit_of_the_layout", lambda f: opd(f, field() * 1e6, unit=None), layout={"unit": "um"}, unit=1e-6)

    def negative(file):
        opd(file).attrs["sign"] = -1

    good("sign", negative, sign=-1)
    good("sign_float", lambda f: opd(f, field().astype("f4")).attrs.__setitem__("sign", np.int8([-1])), sign=-1)
    good("sign_of_the_layout", negative, layout={"sign": 1})

    def packed(file):
        dataset = opd(file, np.rint((field() - 1.5e-4) / 4e-9).astype("i2"), unit=None)
        dataset[2, 3, 4] = -32768
        dataset[5, 0, 0] = -32768
        dataset[6] = -32768
        dataset.attrs.update({"units": "m", "scale_factor": np.float32(4e-9), "add_offset": [1.5e-4],
                              "_FillValue": np.int16(-32768)})

    good("packed_by_cf", packed, scale=float(np.float32(4e-9)), offset=1.5e-4, missing=-32768)
    good("scale_of_the_layout", packed, layout={"scale": 2.0, "offset": 1.0}, scale=2.0, offset=1.0, missing=-32768)

    def dark(file):
        data = field().astype("f4")
        y, x = np.mgrid[0:ROWS, 0:COLUMNS]
        outside = (x - 4.5) ** 2 + (y - 5.5) ** 2 > 25
        data[:, outside] = np.nan
        data[3, 1, 4] = np.nan
        data[4] = np.nan
        data[5, 6, 5] = np.inf
        data[6, :8] = np.nan
        opd(file, data)
        file["mask"] = (~outside).astype("u1")

    good("dark", dark)
    good("soft_link", soft_link)


def mask_as(dtype):
    def make(file):
        opd(file)
        mask = np.ones((ROWS, COLUMNS), dtype)
        mask[0, :3] = 0
        mask[-1, -1] = 0
        file["mask"] = mask
    return make


def axis_orders():
    for axes in ((0, 2, 1), (1, 0, 2), (1, 2, 0), (2, 0, 1), (2, 1, 0)):
        for label, how in (("plain", {}), ("chunks", dict(chunks=(4, 5, 6))),
                           ("deflate", dict(chunks=(5, 6, 4), compression=1))):

            def make(file, axes=axes, how=how):
                data = field().astype("f4").transpose(np.argsort(axes))
                opd(file, np.ascontiguousarray(data), **how)
                mask = np.ones((ROWS, COLUMNS), "u1")
                mask[0, :2] = 0
                mask[7, 3] = 0
                file["mask"] = mask if axes[1] < axes[2] else mask.T

            good(f"axes_{''.join(map(str, axes))}_{label}", make, layout={"axes": axes}, axes=axes)

    def wide(file):
        opd(file, np.ascontiguousarray(field(700, 40, 30).astype("f4").transpose(2, 1, 0)))

    good("axes_210_wide", wide, layout={"axes": (2, 1, 0)}, axes=(2, 1, 0))


def surroundings():
    for dtype in ("u1", "i8", "?"):
        good(f"mask_{np.dtype(dtype).name}", mask_as(dtype))

    def coordinates(file):
        opd(file)
        file["x"] = np.linspace(-0.1, 0.1, COLUMNS)
        file["y"] = np.linspace(-120.0, 120.0, ROWS).astype("f4")
        file["y"].attrs["unit"] = "mm"
        file["time"] = 3.0 + np.arange(FRAMES) / 20e3
        file["signals/pressure"] = random.standard_normal(FRAMES).astype("f4")
        file["signals/pressure"].attrs["unit"] = "Pa"
        file["signals/accelerometer"] = random.standard_normal(FRAMES)
        file["signals/counter"] = np.arange(FRAMES)
        file["signals/short"] = np.zeros(5)
        file["signals/folder/deeper"] = np.zeros(FRAMES)
        np.save(folder / "surroundings_pressure.npy", file["signals/pressure"][...])

    good("surroundings", coordinates, attrs=dict(frame_rate_hz=None, aperture_diameter_m=None))

    def worded(file):
        dataset = opd(file)
        dataset.attrs["frame_rate_hz"] = "12500"
        dataset.attrs["mach"] = np.array([0.7], "f4")
        file.attrs["campaign"] = np.bytes_("fixed")
        file.attrs["run"] = np.int64(12)
        file.attrs.create("source", "flight  ", dtype=h5py.string_dtype("utf-8", 12))
        file.attrs.create("note", ["only one"], dtype=h5py.string_dtype())
        file.attrs["wavelength_m"] = np.nan

    good("worded", worded, attrs=dict(frame_rate_hz=1.0, azimuth_deg=-45, elevation_deg=np.float32(12.5)))

    def milliseconds(file):
        opd(file)
        file["time"] = np.arange(FRAMES) * 0.5
        file["time"].attrs["units"] = "ms"

    good("milliseconds", milliseconds, attrs=dict(frame_rate_hz=None))


def external_link(file):
    file["opd"] = h5py.ExternalLink("type_le_f4_plain.h5", "/opd")


def hidden_external_link(file):
    file["away"] = h5py.ExternalLink("/etc/passwd", "/")
    file["opd"] = h5py.SoftLink("/away/opd")


def external_storage(file):
    (folder / "outside.raw").write_bytes(bytes(FRAMES * ROWS * COLUMNS * 4))
    opd(file, np.zeros((FRAMES, ROWS, COLUMNS), "f4"), external=[(str(folder / "outside.raw"), 0, h5py.h5f.UNLIMITED)])


def virtual(file):
    layout = h5py.VirtualLayout((FRAMES, ROWS, COLUMNS), "f4")
    layout[...] = h5py.VirtualSource("type_le_f4_plain.h5", "opd", (FRAMES, ROWS, COLUMNS))
    file.create_virtual_dataset("opd", layout)


def external_signal(file):
    opd(file)
    file["signals/away"] = h5py.ExternalLink("type_le_f4_plain.h5", "/opd")


def compact(file):
    dcpl = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    dcpl.set_layout(h5py.h5d.COMPACT)
    low_level(file, dcpl, "f4", field())[...] = field()


def filtered_by(set_filter):
    def make(file):
        dcpl = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
        dcpl.set_chunk((4, 12, 10))
        set_filter(dcpl)
        low_level(file, dcpl, "f4", field())[...] = field()
    return make


def time_of(values):
    def make(file):
        opd(file)
        file["time"] = values
    return make


def huge(written):
    def make(file):
        dataset = file.create_dataset("opd", (10**12, 128, 128), "f4", chunks=(10**5, 16, 16), compression=1)
        dataset.attrs["unit"] = "m"
        if written:
            dataset.id.write_direct_chunk((0, 0, 0), b"x" * 20)
    return make


def refusals():
    unsafe = "unsafe-file"
    refused("external_link", unsafe, "external link", external_link)
    refused("hidden_external_link", unsafe, "/etc/passwd", hidden_external_link)
    refused("external_storage", unsafe, "external file", external_storage)
    refused("virtual", unsafe, "virtual dataset", virtual, libver="latest")
    refused("external_signal", unsafe, "external link", external_signal)

    unsupported = "unsupported-storage"
    refused("compact", unsupported, "compactly", compact)
    refused("lzf", unsupported, "lzf", lambda f: opd(f, chunks=True, compression="lzf"))
    refused("scale_offset", unsupported, "scale-offset", filtered_by(
        lambda dcpl: dcpl.set_scaleoffset(h5py.h5z.SO_FLOAT_DSCALE, 8)))
    if h5py.h5z.filter_avail(h5py.h5z.FILTER_SZIP):
        refused("szip", unsupported, "szip", filtered_by(lambda dcpl: dcpl.set_szip(h5py.h5z.SZIP_NN_OPTION_MASK, 8)))
    refused("float16", unsupported, "float of 2 bytes", lambda f: opd(f, field().astype("f2")))
    refused("unsigned", unsupported, "uint16", lambda f: opd(f, np.zeros((FRAMES, ROWS, COLUMNS), "u2")))

    mismatch = "layout-mismatch"
    refused("complex", mismatch, "compound", lambda f: opd(f, field().astype("c8")))
    refused("rank_two", mismatch, "2 dimensions (23 x 12)", lambda f: opd(f, field()[:, :, 0]))
    refused("rank_four", mismatch, "4 dimensions", lambda f: opd(f, field()[None]))
    refused("scalar", mismatch, "a single value", lambda f: opd(f, 1.0))
    refused("no_frames", mismatch, "0 x 12 x 10", lambda f: opd(f, field()[:0], chunks=(1, 12, 10),
                                                                maxshape=(None, ROWS, COLUMNS)))
    refused("never_written", mismatch, "never written",
            lambda f: f.create_dataset("opd", (FRAMES, ROWS, COLUMNS), "f4").attrs.__setitem__("unit", "m"))
    refused("never_written_chunks", mismatch, "never written", lambda f: f.create_dataset(
        "opd", (FRAMES, ROWS, COLUMNS), "f4", chunks=(1, 12, 10)).attrs.__setitem__("unit", "m"))
    refused("no_unit", mismatch, "'unit'", lambda f: opd(f, unit=None))
    refused("unknown_unit", mismatch, "'furlong'", lambda f: opd(f, unit="furlong"))
    refused("odd_sign", mismatch, "'sign' is 2", lambda f: opd(f).attrs.__setitem__("sign", 2))
    refused("no_time", mismatch, "frame_rate_hz", opd, attrs=dict(frame_rate_hz=None))
    refused("negative_rate", mismatch, "-5", opd, attrs=dict(frame_rate_hz=-5.0))
    refused("short_time", mismatch, "'/time' has the shape 22", time_of(np.arange(FRAMES - 1.0)))
    refused("time_of_text", mismatch, "text", time_of(np.array([b"a"] * FRAMES)))
    refused("time_backwards", mismatch, "frame 7", time_of(np.where(np.arange(FRAMES) == 7, 0.0, np.arange(FRAMES))))
    refused("time_not_finite", mismatch, "frame 7", time_of(np.where(np.arange(FRAMES) == 7, np.nan,
                                                                     np.arange(FRAMES))))
    refused("time_stands", mismatch, "stands still", time_of(np.zeros(FRAMES)), attrs=dict(frame_rate_hz=None))
    refused("only_x", mismatch, "only '/x'", lambda f: (opd(f), f.__setitem__("x", np.arange(10.0))))
    refused("x_falls", mismatch, "x must rise", lambda f: (opd(f), f.__setitem__("x", -np.arange(10.0)),
                                                           f.__setitem__("y", np.arange(12.0))))
    refused("no_size", mismatch, "aperture_diameter_m", opd, attrs=dict(aperture_diameter_m=None))
    refused("other_mask", mismatch, "10 x 12", lambda f: (opd(f), f.__setitem__("mask", np.ones((10, 12), "u1"))))
    refused("group_for_dataset", mismatch, "not a dataset", lambda f: f.create_group("opd"))
    refused("no_dataset", mismatch, "no dataset '/opd'", lambda f: None)
    refused("dangling", mismatch, "no dataset '/opd'", lambda f: f.__setitem__("opd", h5py.SoftLink("/nowhere")))
    refused("number_expected", mismatch, "'mach' is 'fast'", opd, attrs=dict(mach="fast"))
    refused("many_values", mismatch, "'mach' is float64 (3 values)", opd, attrs=dict(mach=[1.0, 2.0, 3.0]))
    refused("huge_grid", "too-large", "points are read", lambda f: f.create_dataset(
        "opd", (1, 10**6, 10**6), "f4", chunks=(1, 10**4, 10**4), compression=1).attrs.__setitem__("unit", "m"))
    refused("huge", "too-large", "chunks", huge(False))
    refused("huge_written", "too-large", "chunks", huge(True))


def broken_files():
    whole = (folder / "type_le_f4_plain.h5").read_bytes()
    chunked = (folder / "chunk_earliest_5x7x4_all.h5").read_bytes()
    for name, code, says, content in (
            ("empty", "not-hdf5", "empty", b""),
            ("text", "not-hdf5", "signature", b"time, opd\n0, 1\n" * 100),
            ("random", "not-hdf5", "signature", random.bytes(5000)),
            ("random_signed", "damaged-file", "", whole[:8] + random.bytes(5000)),
            ("zeros_signed", "damaged-file", "", whole[:8] + bytes(5000)),
            ("truncated", "damaged-file", "truncated file", whole[:len(whole) // 2]),
            ("truncated_chunks", "damaged-file", "truncated file", chunked[:-700]),
            ("only_signature", "damaged-file", "", whole[:8])):
        (folder / f"{name}.h5").write_bytes(content)
        layout_entry(name, None, code, says)


element_types()
chunk_shapes()
storage()
values()
axis_orders()
surroundings()
refusals()
if not wanted:
    broken_files()
(folder / "manifest.json").write_text(json.dumps(manifest))
