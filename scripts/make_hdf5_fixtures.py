"""Makes fixtures/files: small HDF5, OME-TIFF and multi-sample TIFF files, written by h5py and tifffile, which share no code with the
program (h5wasm is another build of the same HDF5 library), and expected.json with what went in. Run by hand:
python3 scripts/make_hdf5_fixtures.py   Needs numpy, h5py and tifffile (2.4, 3.16 and 2026.3 were used). Invented numbers only."""
import gzip
import json
import zlib
from pathlib import Path

import h5py
import numpy as np
import tifffile

OUT = Path(__file__).resolve().parent.parent / "fixtures" / "files"
PAGES, ROWS, COLS = 3, 19, 23
expected = {}


def stack(dtype, seed=1, pages=PAGES):
    rng = np.random.default_rng(seed)
    dtype = np.dtype(dtype)
    shape = (pages, ROWS, COLS)
    if dtype.kind == "f":
        a = (rng.normal(size=shape) * 10.0 ** rng.integers(-2, 3, size=shape)).astype(dtype)
        a[0, 0, 0] = np.nan
        return a
    if dtype.kind == "c":
        return (rng.normal(size=shape) + 1j * rng.normal(size=shape)).astype(dtype)
    if dtype.kind == "b":
        return rng.normal(size=shape) > 0
    info = np.iinfo(dtype)
    return rng.integers(info.min, info.max, size=shape, dtype=dtype.newbyteorder("="), endpoint=True).astype(dtype)


def remember(name, planes):
    """CRC-32 of each page as float32, by plane (samples; real and imaginary part)."""
    sums = []
    for pages in planes:
        here = []
        for p in pages:
            f = np.asarray(p).astype(np.float64).astype("<f4")
            f[np.isnan(f)] = np.nan
            here.append(zlib.crc32(f.tobytes()))
        sums.append(here)
    expected[name] = sums


def kept(file, path, data, **options):
    file.create_dataset(path, data=data, **options)
    pages = data if data.ndim == 3 else data[None]
    planes = [pages.real, pages.imag] if data.dtype.kind == "c" else [pages]
    remember(f"{Path(file.filename).name}:/{path}", planes)


def hdf5():
    with h5py.File(OUT / "types.h5", "w", track_order=True) as f:
        for t in ["i1", "u1", "<i2", ">u2", "<i4", ">i4", "<i8", "<u8", "<f2", "<f4", ">f4", "<f8", ">f8", "?", "<c8", ">c16"]:
            kept(f, "t/" + t.replace("<", "le").replace(">", "be").replace("?", "bool"), stack(t))
        kept(f, "flat", stack("<f4", 2)[0])
        gz = dict(chunks=(1, 8, 8), compression="gzip", shuffle=True, fletcher32=True)
        kept(f, "chunked", stack("<f4", 3), **gz)
        kept(f, "chunks_over_pages", stack("<f8", 4), chunks=(2, 19, 5), compression="gzip")
        kept(f, "complex_chunked", stack("<c8", 5), **gz)
        kept(f, "lzf", stack("<u2", 6), chunks=(1, 19, 23), compression="lzf")
        f["soft"] = h5py.SoftLink("/flat")
        remember("types.h5:/soft", [stack("<f4", 2)[:1]])
        f["words"] = "hello"
        f["line"] = np.zeros(16, "f4")
        f["many"] = np.zeros((2, 2, 2, 2), "f4")
        f["pair"] = np.zeros((4, 4), [("a", "f4"), ("b", "f4")])
        f["dangling"] = h5py.SoftLink("/nothing")


def nexus():
    with h5py.File(OUT / "run.nxs", "w") as f:
        f.attrs["default"] = "entry"
        entry = f.create_group("entry")
        entry.attrs["NX_class"], entry.attrs["default"] = "NXentry", "data"
        d = entry.create_group("data")
        d.attrs["NX_class"], d.attrs["signal"] = "NXdata", "amplitude"
        d.attrs["axes"] = ["temperature", "y", "x"]
        kept(f, "entry/data/amplitude", np.abs(stack("<f4", 7)) + 1)
        kept(f, "entry/data/phase", stack("<f4", 8))
        for name, values, unit in [
            ("temperature", [-93.15, -98.15, -103.15], "degC"),
            ("y", np.arange(ROWS) * 0.012, "um"),
            ("x", 5 - np.arange(COLS) * 10.0, "nm"),
        ]:
            d[name] = np.asarray(values, "f8")
            d[name].attrs["units"] = unit
        old = f.create_group("old")  # axes as the signal itself names them
        old.attrs["NX_class"] = "NXdata"
        kept(f, "old/signal", stack("<f4", 9))
        old["signal"].attrs["signal"], old["signal"].attrs["axes"] = 1, "t:v:h"
        for name, values, unit in [
            ("t", [180.0, 170, 160], "K"),
            ("v", np.linspace(0, 1, ROWS) ** 2, "um"),
            ("h", np.arange(COLS) * 1e-8, "m"),
        ]:
            old[name] = np.asarray(values)
            old[name].attrs["units"] = unit
        bare = f.create_group("bare")  # no units: nothing is claimed
        bare.attrs["NX_class"], bare.attrs["axes"] = "NXdata", ["temperature", "y", "x"]
        kept(f, "bare/a", stack("<f4", 10))
        bare["temperature"], bare["y"], bare["x"] = np.arange(3.0), np.arange(float(ROWS)), np.arange(float(COLS))


def outward():
    """Datasets that lie in other files, and chunks that swell."""
    with h5py.File(OUT / "outward.h5", "w") as f:
        f["external"] = h5py.ExternalLink("types.h5", "/flat")
        f.create_dataset("storage", shape=(4, 4), dtype="u1", external=[("/etc/hostname", 0, 16)])
        layout = h5py.VirtualLayout(shape=(ROWS, COLS), dtype="f4")
        layout[:] = h5py.VirtualSource("types.h5", "flat", shape=(ROWS, COLS))
        f.create_virtual_dataset("virtual", layout)
        f["inside"] = stack("<f4", 2)[0]
        f.create_dataset("wide", shape=(1, 100_000, 100_000), dtype="f4", chunks=(1, 64, 64))
        f.create_dataset("coarse", shape=(64, 4096, 4096), dtype="f4", chunks=(64, 4096, 4096))
    bomb = OUT / "bomb.h5"
    with h5py.File(bomb, "w") as f:
        d = f.create_dataset("bomb", shape=(64, 64), dtype="f4", chunks=(64, 64), compression="gzip")
        d.id.write_direct_chunk((0, 0), zlib.compress(bytes(600 << 20), 9))
    (OUT / "bomb.h5.gz").write_bytes(gzip.compress(bomb.read_bytes(), 9, mtime=0))
    bomb.unlink()


def tiffs():
    for name, planar, order in [("samples-f4.tif", "contig", "<"), ("samples-planar-u2-be.tif", "separate", ">")]:
        t = "f4" if "f4" in name else "u2"
        pages = [stack(t, 20 + k) for k in range(2)]  # two pages of three samples
        with tifffile.TiffWriter(OUT / name, byteorder=order) as w:
            for p in pages:
                a = p if planar == "separate" else np.moveaxis(p, 0, -1)
                w.write(np.ascontiguousarray(a), photometric="minisblack", planarconfig=planar, metadata=None, rowsperstrip=5)
        remember(name, [[p[s] for p in pages] for s in range(3)])
    a = np.moveaxis(stack("u1", 30), 0, -1)
    tifffile.imwrite(OUT / "samples-rgb-tiles-u1.tif", np.ascontiguousarray(a), photometric="rgb", tile=(16, 16), metadata=None)
    remember("samples-rgb-tiles-u1.tif", [[a[..., s]] for s in range(3)])
    a = np.moveaxis(stack("u2", 31), 0, -1)
    tifffile.imwrite(
        OUT / "samples-predicted-u2.tif",
        np.ascontiguousarray(a),
        photometric="rgb",
        compression="zlib",
        predictor=2,
        metadata=None,
    )
    remember("samples-predicted-u2.tif", [[a[..., s]] for s in range(3)])
    a = stack("f4", 32)
    tifffile.imwrite(
        OUT / "sized.ome.tif",
        a,
        photometric="minisblack",
        metadata={"axes": "TYX", "PhysicalSizeX": 0.010, "PhysicalSizeXUnit": "µm", "PhysicalSizeY": 12, "PhysicalSizeYUnit": "nm"},
        ome=True,
    )
    remember("sized.ome.tif", [a])
    for name, c in [("complex-c8.npy", stack("<c8", 40)), ("complex-fortran-c16.npy", np.asfortranarray(stack(">c16", 41)))]:
        np.save(OUT / name, c)
        remember(name, [c.real, c.imag])


def main():
    OUT.mkdir(parents=True, exist_ok=True)
    for old in OUT.iterdir():
        old.unlink()
    hdf5()
    nexus()
    outward()
    tiffs()
    source = f"made by scripts/make_hdf5_fixtures.py with NumPy {np.__version__}, h5py {h5py.__version__}, tifffile {tifffile.__version__}"
    with open(OUT / "expected.json", "w") as f:
        json.dump({"source": source, "meaning": "crc32 of float32 pages, by plane", "files": expected}, f, indent=1)
        f.write("\n")


main()
