"""Writes the families formats/ and malformed/*.{mat,csv,dx,nii,gz,zip} beside this file; the same bytes on every run.

    /usr/bin/python3 testdata/make_formats.py      (Debian: apt-get install python3-scipy python3-nibabel)
"""
import gzip
import io
import pathlib
import struct
import zipfile
import zlib

import nibabel as nib
import numpy as np
import scipy.io

HERE = pathlib.Path(__file__).parent
shots, samples = 5, 16
angle = np.arange(shots)


def fields():
    """The acquisition of make_numpy.py, which every file of formats/ holds too."""
    d, s, j = np.ogrid[0:2, 0:shots, 0:samples]
    return {
        "signal": ((s + 1) * (16 * d + j) + 1j * (s - 3 * j + d)).astype("c8"),
        "gradient_mT_per_m": np.stack([angle + 1, 2 - angle, angle % 3 - 1], axis=1).astype("f8"),
        "delay_us": 0.5 * (1 + np.arange(2)),
        "dwell_ns": 4.0,
        "time_zero_sample": -1.25,
        "sequence": "inversion-recovery",
        "encoding": "spoke",
        "temperature_C": 37.0,
        "note": "20 \u00b5l, pH 7.4",
    }


def mat(data, **how):
    out = io.BytesIO()
    scipy.io.savemat(out, data, **how)
    raw = bytearray(out.getvalue())
    if how.get("format", "5") == "5":
        raw[:116] = b"MATLAB 5.0 MAT-file, written by make_formats.py".ljust(116)  # without the time of day
    return bytes(raw)


def swapped(value):
    """The level 5 element of a double array, written by hand with the most significant byte first."""
    name, array = value
    array = np.atleast_2d(np.asarray(array, ">f8"))

    def element(kind, body):
        return struct.pack(">II", kind, len(body)) + body + bytes(-len(body) % 8)

    body = element(6, struct.pack(">II", 6, 0)) + element(5, struct.pack(">ii", *array.shape)) + element(1, name.encode())
    return struct.pack(">II", 14, len(body) + 8 + array.nbytes) + body + element(9, array.T.tobytes())


def big_endian(data):
    return b"MATLAB 5.0 MAT-file, big-endian".ljust(116) + bytes(8) + b"\x01\x00MI" + b"".join(map(swapped, data.items()))


def columns(delimiter, decimal, header=True):
    """Real and imaginary part of every delay and shot, a column each, with a time axis before them."""
    f = fields()
    names, values = ["t [ns]"], [4 * (np.arange(samples) + 1.25)]
    for d in range(2):
        for s in range(shots):
            names += ["re_d%d_s%d" % (d, s), "im_d%d_s%d" % (d, s)]
            values += [f["signal"][d, s].real, f["signal"][d, s].imag]
    lines = [delimiter.join(names)] if header else []
    for row in np.stack(values, axis=1):
        lines.append(delimiter.join("%g" % v for v in row).replace(".", decimal))
    return "\r\n".join(lines) + "\r\n"


def dx():
    """A LINK of one block for every shot at the first delay."""
    f = fields()
    text = ["##TITLE= all shots", "##JCAMP-DX= 5.01", "##DATA TYPE= LINK", "##BLOCKS= %d" % shots]
    for s in range(shots):
        g = f["gradient_mT_per_m"][s]
        text += ["##TITLE= shot %d" % s, "##JCAMP-DX= 5.01", "##DATA TYPE= EMR FID", "##NTUPLES= EMR FID",
                 "##VAR_NAME= TIME, REAL, IMAGINARY, PAGE NUMBER", "##SYMBOL= X, R, I, N", "##VAR_DIM= 16, 16, 16, 2",
                 "##UNITS= NANOSECONDS, ARBITRARY UNITS, ARBITRARY UNITS,", "##FIRST= 5, 0, 0, 1", "##LAST= 65, 0, 0, 2",
                 "##FACTOR= 1, 1, 1, 1"]
        text += ["##$G%s [mT/m]= %g" % (axis, v) for axis, v in zip("XYZ", g)]
        for page, part in ((1, f["signal"][0, s].real), (2, f["signal"][0, s].imag)):
            text += ["##PAGE= N=%d" % page, "##DATA TABLE= (X++(%s..%s)), XYDATA" % ("RI"[page - 1], "RI"[page - 1])]
            text.append("5" + "".join("%+d" % v for v in part[:8]))
            text.append("37" + "".join("%+d" % v for v in part[8:]))
        text += ["##END NTUPLES= EMR FID", "##END="]
    return "\n".join(text + ["##END=", ""])


def nifti(endian="<", dtype="i2"):
    image = nib.Nifti1Image(np.arange(24).reshape(2, 3, 4).astype(dtype), np.diag([2, 2, 3, 1]), nib.Nifti1Header(endianness=endian))
    image.header.set_xyzt_units("mm")
    return image.to_bytes()


def zipped(members):
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as z:
        for name, data in members:
            z.writestr(zipfile.ZipInfo(name), data)
    return out.getvalue()


def shot(s):
    return "re,im\n" + "".join("%g,%g\n" % (v.real, v.imag) for v in fields()["signal"][0, s])


def family():
    f = fields()
    signal = f["signal"]
    table = "gx [mT/m],gy [mT/m],gz [mT/m]\n" + "".join("%g,%g,%g\n" % tuple(g) for g in f["gradient_mT_per_m"])
    numbers = {k: v for k, v in f.items() if np.asarray(v).dtype.kind == "f"}
    return {
        "plain.mat": mat(f), "compressed.mat": mat(f, do_compression=True),
        "struct.mat": mat({"scan": {**f, "shots": np.array([signal[:, s] for s in range(shots)] + [None], object)[:shots]}}),
        "level-4.mat": mat({k: np.atleast_2d(v) for k, v in numbers.items()} | {"text": "spoke"}, format="4"),
        "big-endian.mat": big_endian(numbers),
        "point.csv": columns(",", ".").encode(), "comma.csv": columns(";", ",").encode(), "tabs.tsv": columns("\t", ".").encode(),
        "plain.txt": columns(" ", ".", header=False).encode(), "utf-16.csv": columns("\t", ",").encode("utf-16"),
        "linked.dx": dx().encode(),
        "little-endian.nii": nifti(), "big-endian.nii": nifti(">"), "float.nii.gz": gzip.compress(nifti(dtype="f4"), mtime=0),
        "shots.zip": zipped([("scan/gradients.csv", table)] + [("scan/shot_%02d.csv" % s, shot(s)) for s in range(shots)]),
    }


def changed(data, at, new):
    return data[:at] + new + data[at + len(new):]


def every(data, old, new):
    assert old in data
    return data.replace(old, new)


def malformed():
    """name: (bytes, kind of fault, words the fault must hold, why)."""
    plain, packed = mat({"x": np.arange(6.0).reshape(2, 3)}), mat({"x": np.arange(600.0)}, do_compression=True)
    table = "a,b,c\n1,2,3\n4,5,6\n7,8,9\n"
    spectrum = ("##TITLE= x\n##JCAMP-DX= 5.01\n##DATA TYPE= EMR SPECTRUM\n##FIRSTX= 1\n##LASTX= 5\n##NPOINTS= 5\n"
                "##XYDATA= (X++(Y..Y))\n1A0JJ\n3A2JJ\n5A4\n##END=\n")
    volume = nifti()
    nested = {"x": 1.0}
    for _ in range(40):
        nested = {"s": nested}
    bomb = zlib.compress(bytes(8 << 20))
    header = plain[:128]
    return {
        "cut-short.mat": (plain[:-9], "bad-file", "may be cut short", "The last nine bytes are gone."),
        "cut-in-header.mat": (plain[:130], "bad-file", "2 bytes are left", "Cut within the tag of the first variable."),
        "cut-compressed.mat": (packed[:-40], "bad-file", "may be cut short", "The compressed variable is cut."),
        "huge-shape.mat": (every(plain, struct.pack("<ii", 2, 3), struct.pack("<ii", 1 << 30, 1 << 30)), "too-large",
                           "more elements than the limit", "Two lengths whose product is 2^60."),
        "negative-length.mat": (every(plain, struct.pack("<ii", 2, 3), struct.pack("<ii", -2, 3)), "bad-file",
                                "none may be negative", "A negative length."),
        "other-shape.mat": (every(plain, struct.pack("<ii", 2, 3), struct.pack("<ii", 2, 4)), "bad-file", "for shape [2, 4]",
                            "The shape takes more values than there are."),
        "bomb.mat": (header + struct.pack("<II", 15, len(bomb)) + bomb, "bad-file", "unpacks to something else than the 0 bytes stated",
                     "Eight mebibytes of zeros, which state no length of their own."),
        "nested.mat": (mat(nested), "too-large", "nested more than 32 deep", "Forty structs in each other."),
        "hdf5.mat": (b"MATLAB 7.3 MAT-file".ljust(124) + b"\x00\x02IM" + bytes(384) + b"\x89HDF\r\n\x1a\n", "unsupported",
                     "HDF5", "The header of version 7.3 with the signature of HDF5 behind it."),
        "ragged.csv": ((table + "1,2\n" + table[6:]).encode(), "bad-file", "line 5: 2 fields, line 2 has 3", "A line lacks a field."),
        "words.csv": ((table + "1,two,3\n1,2,3\n").encode(), "bad-file", "line 5 column 2", "A word among the numbers."),
        "check-value.dx": (every(spectrum, "3A2", "3A3").encode(), "bad-file", "line 9: the value that checks the line before is 13",
                           "A line does not begin with the value that the one before ends with."),
        "cut-short.dx": (spectrum[:-8].encode(), "bad-file", "without ##END=", "The last label is cut."),
        "lost-line.dx": (every(spectrum, "3A2JJ\n5A4\n", "").encode(), "bad-file", "3 values in a table of 5 points", "Two lines are lost."),
        "difference-first.dx": (every(spectrum, "1A0JJ", "1JJ").encode(), "bad-file", "a difference before any value", "No value to add to."),
        "repetitions.dx": (every(spectrum, "1A0JJ", "1A0s9999999999").encode(), "too-large", "values in a table",
                           "One letter that stands for ten thousand million values."),
        "cut-short.nii": (volume[:-5], "bad-file", "may be cut short", "Five bytes of the last values are gone."),
        "cut-in-header.nii": (volume[:200], "bad-file", "byte 200", "Cut within the header."),
        "datatype.nii": (changed(volume, 70, struct.pack("<h", 128)), "unsupported", "datatype 128", "Colours."),
        "negative-axis.nii": (changed(volume, 42, struct.pack("<h", -2)), "bad-file", "negative length", "A negative length."),
        "nine-axes.nii": (changed(volume, 40, struct.pack("<h", 9)), "bad-file", "9 axes", "More axes than the standard has."),
        "offset.nii": (changed(volume, 108, struct.pack("<f", 10)), "bad-file", "values at byte 10", "Values within the header."),
        "not-a-number.nii": (changed(volume, 280, struct.pack("<f", np.nan)), "bad-file", "not finite", "NaN in the sform."),
        "pair.nii": (changed(volume, 344, b"ni1\0"), "unsupported", "two files", "The header of a pair of files."),
        "cut-short.nii.gz": (gzip.compress(volume, mtime=0)[:-12], "bad-file", "do not unpack", "Cut within the packed values."),
        "checksum.nii.gz": (every(gzip.compress(volume, mtime=0), struct.pack("<I", zlib.crc32(volume)), bytes(4)), "bad-file",
                            "do not unpack", "The checksum of the unpacked bytes is another."),
        "bomb.csv.gz": (gzip.compress(b"1,2\n" * (9 << 20), mtime=0), "too-large", "unpack to more than", "36 mebibytes of two numbers."),
        "two-lengths.zip": (zipped([("s1.csv", "a\n1\n2\n"), ("s2.csv", "a\n1\n")]), "bad-file", "must be alike",
                            "A series whose files have unequal lengths."),
        "words-only.zip": (zipped([("a.txt", "words"), ("b.txt", "more")]), "unsupported", "which no known format does",
                           "Nothing in the archive is of a known format."),
    }


def main():
    for name, data in family().items():
        (HERE / "formats").mkdir(exist_ok=True)
        (HERE / "formats" / name).write_bytes(data)
    for name, (data, kind, words, why) in malformed().items():
        (HERE / "malformed" / name).write_bytes(data)
        (HERE / "malformed" / (name + ".why.txt")).write_text("%s\n%s\n\n%s\n" % (kind, words, why))


main()
