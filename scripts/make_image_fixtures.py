"""Makes fixtures/images: small TIFF and .npy files of every kind the reader must take, written by tifffile and NumPy, which
share no code with the program, and expected.json with what went in. Run by hand: python3 scripts/make_image_fixtures.py
Needs python3-numpy and python3-tifffile (2023.2.3 was used). Invented numbers only."""
import json
import struct
import zlib
from pathlib import Path

import numpy as np
import tifffile

OUT = Path(__file__).resolve().parent.parent / "fixtures" / "images"
ROWS, COLS = 37, 29  # neither a multiple of the tile nor of the strip
expected = {}


def image(dtype, page=0):
    """Values over the whole range of the type, no two rows alike."""
    rng = np.random.default_rng(100 + page)
    dtype = np.dtype(dtype)
    if dtype.kind == "f":
        a = (rng.normal(size=(ROWS, COLS)) * 10.0 ** rng.integers(-3, 4, size=(ROWS, COLS))).astype(dtype)
        a[3, 5] = np.nan
        a[0, 0] = np.nan
        a[ROWS - 1, COLS - 1] = np.inf
        return a
    info = np.iinfo(dtype)
    a = rng.integers(info.min, info.max, size=(ROWS, COLS), dtype=dtype.newbyteorder("="), endpoint=True).astype(dtype)
    a[0, 0], a[1, 1] = info.min, info.max
    return a


def remember(name, pages):
    """As float32, the type the program works in: checked to the bit by a checksum over all and by some values in clear."""
    pages = [np.asarray(p).astype(np.float64).astype(np.float32) for p in pages]
    for p in pages:
        p[np.isnan(p)] = np.nan  # one bit pattern
    expected[name] = {
        "rows": pages[0].shape[0],
        "cols": pages[0].shape[1],
        "pages": [
            {
                "crc32": zlib.crc32(p.astype("<f4").tobytes()),
                "corner": str(p[0, 1]),
                "middle": str(p[p.shape[0] // 2, p.shape[1] // 3]),
                "nan": int(np.isnan(p).sum()),
            }
            for p in pages
        ],
    }


def tiff(name, pages, byteorder="<", big=False, **options):
    with tifffile.TiffWriter(OUT / name, byteorder=byteorder, bigtiff=big) as w:
        for p in pages:
            w.write(p, photometric="minisblack", metadata=None, contiguous=False, **options)
    remember(name, pages)


def lzw(data):
    """TIFF's LZW (Revision 6.0, section 13), written out for these files because the codec package is not at hand."""
    out, bits, held = bytearray(), 0, 0

    def put(code, width):
        nonlocal bits, held
        bits = (bits << width) | code
        held += width
        while held >= 8:
            held -= 8
            out.append((bits >> held) & 255)
            bits &= (1 << held) - 1

    table, width = {bytes([i]): i for i in range(256)}, 9
    put(256, width)
    following = 258
    word = b""
    for byte in data:
        longer = word + bytes([byte])
        if longer in table:
            word = longer
            continue
        put(table[word], width)
        table[longer] = following
        following += 1
        if following == 4094:
            put(256, width)
            table, width, following = {bytes([i]): i for i in range(256)}, 9, 258
        elif following == (1 << width) and width < 12:
            width += 1
        word = bytes([byte])
    if word:
        put(table[word], width)
        following += 1
        if following == (1 << width) and width < 12:
            width += 1
    put(257, width)
    if held:
        out.append((bits << (8 - held)) & 255)
    return bytes(out)


def packbits(data, row_bytes):
    """Section 9 of the same; runs do not cross rows."""
    out = bytearray()
    for start in range(0, len(data), row_bytes):
        row = data[start : start + row_bytes]
        i = 0
        while i < len(row):
            run = 1
            while i + run < len(row) and run < 128 and row[i + run] == row[i]:
                run += 1
            if run >= 2:
                out += bytes([257 - run, row[i]])
                i += run
                continue
            end = i + 1
            while end < len(row) and end - i < 128 and not (end + 1 < len(row) and row[end] == row[end + 1]):
                end += 1
            out += bytes([end - i - 1]) + row[i:end]
            i = end
    return bytes(out)


def predicted(a, predictor, order):
    """Rows as predictor 2 (differences) or 3 (sorted bytes, differences) stores them."""
    if predictor == 1:
        return a.astype(a.dtype.newbyteorder(order)).tobytes()
    if predictor == 2:
        u = a.view(f"u{a.dtype.itemsize}").astype(f"u{a.dtype.itemsize}")
        d = u.copy()
        d[:, 1:] = u[:, 1:] - u[:, :-1]
        return d.astype(d.dtype.newbyteorder(order)).tobytes()
    b = a.astype(a.dtype.newbyteorder(">")).view(np.uint8).reshape(a.shape[0], a.shape[1], a.dtype.itemsize)
    b = b.transpose(0, 2, 1).reshape(a.shape[0], -1)
    d = b.copy()
    d[:, 1:] = b[:, 1:] - b[:, :-1]
    return d.tobytes()


def packed_tiff(name, pages, compression, predictor=1, order="<", rows_per_strip=8):
    """A strip TIFF by hand, for compressions and predictors that tifffile needs a codec package for."""
    head = b"II" if order == "<" else b"MM"
    body = bytearray(head + struct.pack(order + "HI", 42, 0))
    link = 4
    for a in pages:
        offsets, counts = [], []
        for r in range(0, a.shape[0], rows_per_strip):
            part = a[r : r + rows_per_strip]
            raw = predicted(part, predictor, order)
            raw = {5: lzw, 8: zlib.compress, 32946: zlib.compress}.get(
                compression, lambda x: packbits(x, part.shape[1] * part.dtype.itemsize)
            )(raw)
            offsets.append(len(body))
            counts.append(len(raw))
            body += raw
        if len(body) % 2:
            body += b"\0"
        where = []
        for values in (offsets, counts):
            where.append(len(body) if len(values) > 1 else values[0])  # a single one stands in the directory itself
            body += struct.pack(f"{order}{len(values)}I", *values)
        form = {"f": 3, "i": 2, "u": 1}[a.dtype.kind]
        tags = [
            (256, 4, 1, a.shape[1]),
            (257, 4, 1, a.shape[0]),
            (258, 3, 1, a.dtype.itemsize * 8),
            (259, 3, 1, compression),
            (262, 3, 1, 1),
            (273, 4, len(offsets), where[0]),
            (277, 3, 1, 1),
            (278, 4, 1, rows_per_strip),
            (279, 4, len(counts), where[1]),
            (317, 3, 1, predictor),
            (339, 3, 1, form),
        ]
        here = len(body)
        body += struct.pack(order + "H", len(tags))
        for tag, kind, count, value in tags:
            v = struct.pack(order + "HH", value, 0) if kind == 3 else struct.pack(order + "I", value)
            body += struct.pack(order + "HHI", tag, kind, count) + v
        body += struct.pack(order + "I", 0)
        struct.pack_into(order + "I", body, link, here)
        link = len(body) - 4
    (OUT / name).write_bytes(body)
    remember(name, pages)


def main():
    OUT.mkdir(parents=True, exist_ok=True)
    for old in OUT.iterdir():
        old.unlink()
    for t in ["u1", "i1", "u2", "i2", "u4", "i4", "f2", "f4", "f8"]:
        for order in "<>":
            tiff(f"plain-{t}-{'le' if order == '<' else 'be'}.tif", [image(t)], order)
    tiff("stack-f4.tif", [image("f4", k) for k in range(5)])
    tiff("stack-big-f4.tif", [image("f4", k) for k in range(3)], big=True)
    tiff("stack-big-be-u2.tif", [image("u2", k) for k in range(2)], ">", big=True)
    tiff("strips-f4.tif", [image("f4")], rowsperstrip=5)
    tiff("strips-of-one-u2.tif", [image("u2")], rowsperstrip=1)
    tiff("tiles-f4.tif", [image("f4"), image("f4", 1)], tile=(16, 16))
    tiff("tiles-be-i2.tif", [image("i2")], ">", tile=(32, 16))
    tiff("tiles-one-wide-f4.tif", [image("f4")], tile=(16, 32))
    tiff("deflate-f4.tif", [image("f4", k) for k in range(2)], compression="zlib")
    tiff("deflate-tiles-be-f8.tif", [image("f8")], ">", compression="zlib", tile=(16, 16))
    tiff("deflate-big-u2.tif", [image("u2")], big=True, compression="zlib", rowsperstrip=7)
    smooth = (np.add.outer(np.arange(ROWS) * 37, np.arange(COLS) * 11) % 500).astype("u2")
    for order, word in (("<", "le"), (">", "be")):
        packed_tiff(f"lzw-f4-{word}.tif", [image("f4"), image("f4", 1)], 5, order=order)
        packed_tiff(f"lzw-u2-{word}.tif", [smooth], 5, order=order, rows_per_strip=ROWS)
        packed_tiff(f"packbits-u2-{word}.tif", [smooth], 32773, order=order)
        packed_tiff(f"predict2-u1-{word}.tif", [image("u1")], 8, 2, order)
        packed_tiff(f"predict2-u2-{word}.tif", [image("u2")], 5, 2, order)
        packed_tiff(f"predict2-i4-{word}.tif", [image("i4")], 8, 2, order)
        packed_tiff(f"predict2-f4-{word}.tif", [image("f4")], 8, 2, order)
        packed_tiff(f"predict3-f4-{word}.tif", [image("f4")], 8, 3, order)
        packed_tiff(f"predict3-f8-{word}.tif", [image("f8")], 32946, 3, order)
    big_noise = np.random.default_rng(5).integers(0, 256, (128, 128)).astype("u1")
    packed_tiff("lzw-noise-u1.tif", [big_noise], 5, rows_per_strip=128)  # fills the code table several times
    packed_tiff("lzw-constant-u1.tif", [np.full((128, 128), 7, "u1")], 5, rows_per_strip=128)
    white = image("u1")
    with tifffile.TiffWriter(OUT / "white-is-zero-u1.tif") as w:
        w.write(white, photometric="miniswhite", metadata=None)
    remember("white-is-zero-u1.tif", [white])
    with tifffile.TiffWriter(OUT / "colour.tif") as w:
        w.write(np.zeros((8, 8, 3), "u1"), photometric="rgb", metadata=None)

    for t in ["u1", "i1", "<u2", ">i2", "<u4", ">i4", "<u8", ">i8", "<f2", ">f2", "<f4", ">f4", "<f8", ">f8", "?"]:
        a = image("u1") > 127 if t == "?" else image(t)
        name = f"npy-{t.replace('<', 'le-').replace('>', 'be-').replace('?', 'bool')}.npy"
        np.save(OUT / name, a)
        remember(name, [a])
    stack = np.stack([image("f4", k) for k in range(4)])
    np.save(OUT / "npy-stack.npy", stack)
    remember("npy-stack.npy", list(stack))
    np.save(OUT / "npy-stack-fortran.npy", np.asfortranarray(stack.astype("f8")))
    remember("npy-stack-fortran.npy", list(stack.astype("f8")))
    np.save(OUT / "npy-fortran.npy", np.asfortranarray(image(">i2")))
    remember("npy-fortran.npy", [image(">i2")])
    for version in ((2, 0), (3, 0)):
        with open(OUT / f"npy-version{version[0]}.npy", "wb") as f:
            np.lib.format.write_array(f, image("f4"), version=version)
        remember(f"npy-version{version[0]}.npy", [image("f4")])
    np.save(OUT / "npy-complex.npy", np.zeros((4, 4), "c8"))
    np.save(OUT / "npy-record.npy", np.zeros((4, 4), [("a", "f4")]))
    np.save(OUT / "npy-object.npy", np.array([[None, 1], [2, 3]], dtype=object), allow_pickle=True)
    np.save(OUT / "npy-line.npy", np.zeros(16, "f4"))

    source = (
        "made by scripts/make_image_fixtures.py with NumPy "
        f"{np.__version__} and tifffile {tifffile.__version__}; values as float32, crc32 over little-endian bytes"
    )
    with open(OUT / "expected.json", "w") as f:
        json.dump({"source": source, "files": expected}, f, indent=1)
        f.write("\n")


main()
