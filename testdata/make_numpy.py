"""Writes the families numpy/ and malformed/*.np[yz] beside this file; the same bytes on every run.

    /usr/bin/python3 testdata/make_numpy.py        (Debian: apt-get install python3-numpy)

Archives are put together with zipfile, not numpy.savez, because the latter writes the time of day into them.
"""
import io
import pathlib
import struct
import zipfile

import numpy as np
from numpy.lib import format as npy

HERE = pathlib.Path(__file__).parent


def array_bytes(array, version=(1, 0)):
    out = io.BytesIO()
    npy.write_array(out, array, version=version, allow_pickle=False)
    return out.getvalue()


def by_hand(header, body=b"", version=1):
    """An NPY file whose header text is not NumPy's."""
    text = header.encode()
    length = struct.pack("<H" if version == 1 else "<I", len(text) + 1)
    return b"\x93NUMPY" + bytes([version, 0]) + length + text + b"\n" + body


def archive(members, method=zipfile.ZIP_STORED, zip64=False):
    """A ZIP archive of (name, bytes) pairs."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as z:
        for name, data in members:
            info = zipfile.ZipInfo(name)  # dated 1980
            info.compress_type = method
            with z.open(info, "w", force_zip64=zip64) as member:
                member.write(data)
    return out.getvalue()


def acquisition(delays=2, shots=5, samples=16):
    """Small whole numbers, which every element type in the family holds exactly."""
    d, s, j = np.ogrid[0:delays, 0:shots, 0:samples]
    angle = np.arange(shots)
    return {
        "signal": ((s + 1) * (16 * d + j) + 1j * (s - 3 * j + d)).astype("<c8"),
        "gradient_mT_per_m": np.stack([angle + 1, 2 - angle, angle % 3 - 1], axis=1).astype("<f8"),
        "delay_us": 0.5 * (1 + np.arange(delays)),
        "dwell_ns": np.float64(4),
        "time_zero_sample": np.float64(-1.25),
        "sequence": np.array("inversion-recovery"),
        "encoding": np.array("spoke"),
        "temperature_C": np.float64(37),
        "note": np.array("20 \u00b5l, pH 7.4"),
    }


def npz(fields, version=(1, 0), **how):
    return archive([(k + ".npy", array_bytes(np.asarray(v), version)) for k, v in fields.items()], **how)


def family():
    """The same acquisition, written in every way that must open equal."""
    fields = acquisition()
    signal = fields["signal"]
    pairs = np.stack([signal.real, signal.imag], axis=-1)
    latin = {k: np.char.encode(v, "latin-1") if v.dtype.kind == "U" else v for k, v in
             ((k, np.asarray(v)) for k, v in fields.items())}
    order = {k: np.asarray(v).astype(np.asarray(v).dtype.newbyteorder(">")) for k, v in fields.items()}
    body = signal.tobytes()
    rest = [(k + ".npy", array_bytes(np.asarray(v))) for k, v in fields.items() if k != "signal"]
    old = by_hand("{'descr': '<c8', 'fortran_order': False, 'shape': (2L, 5L, 16L), }", body)
    other = by_hand('{"shape":(2,5,16),"fortran_order":False,"descr":"=c8"}', body, 3)
    return {
        "stored.npz": npz(fields),
        "deflated.npz": npz(fields, method=zipfile.ZIP_DEFLATED),
        "zip64.npz": npz(fields, zip64=True),
        "version-2.npz": npz(fields, version=(2, 0)),
        "version-3.npz": npz(fields, version=(3, 0)),
        "big-endian.npz": npz(order),
        "column-major.npz": npz({**fields, "signal": np.asfortranarray(signal),
                                 "gradient_mT_per_m": np.asfortranarray(fields["gradient_mT_per_m"])}),
        "complex128.npz": npz({**fields, "signal": signal.astype("<c16")}),
        "pairs-int16.npz": npz({**fields, "signal": pairs.astype("<i2")}),
        "pairs-float16.npz": npz({**fields, "signal": pairs.astype(">f2")}),
        "pairs-column-major.npz": npz({**fields, "signal": np.asfortranarray(pairs)}),
        "latin-1.npz": npz(latin),
        "long-lengths.npz": archive([("signal.npy", old)] + rest),
        "other-key-order.npz": archive([("signal.npy", other)] + rest),
    }


def changed(data, at, new):
    return data[:at] + new + data[at + len(new):]


def every(data, old, new):
    assert old in data
    return data.replace(old, new)


def malformed():
    """name: (bytes, kind of fault, words the fault must hold, why)."""
    good = array_bytes(np.arange(12, dtype="<f8").reshape(3, 4))
    fields = acquisition()
    stored = npz(fields)
    directory = stored.index(b"PK\x01\x02")
    head = "{'descr': '%s', 'fortran_order': False, 'shape': %s, }"
    wide = acquisition(shots=208, samples=4)
    cases = {
        "empty.npy": (b"", "bad-file", "the file is empty", "No bytes at all."),
        "no-format.npy": (b"delay;signal\n1,5;2,5\n" * 4, "unsupported", "which no known format does",
                          "Text with the extension of a NumPy array: content decides, not the name."),
        "magic-only.npy": (good[:6], "bad-file", "byte 6", "Cut behind the first six bytes."),
        "cut-in-header.npy": (good[:70], "bad-file", "byte 70", "Cut within the header text."),
        "cut-in-values.npy": (good[:-5], "bad-file", "byte 219", "Five bytes of the last value are gone."),
        "trailing-bytes.npy": (good + b"\0", "bad-file", "1 bytes follow", "NumPy would pass over the extra byte."),
        "version-9.npy": (changed(good, 6, b"\x09"), "unsupported", "version 9.0", "A version that does not exist yet."),
        "huge-header.npy": (b"\x93NUMPY\x02\x00\xff\xff\xff\xff{", "too-large", "4294967295 bytes stated",
                            "Twelve bytes that ask for a header of 4 GiB."),
        "negative-length.npy": (by_hand(head % ("<f8", "(-1, 4)"), bytes(32)), "bad-file", "not negative",
                                "NumPy takes -1 for 'as many as there are'."),
        "overflow.npy": (by_hand(head % ("<f8", "(4294967296, 4294967296)")), "too-large", "more elements than the limit",
                         "The product of the lengths is 2^64, which is 0 to a program that does not look."),
        "overflow-beside-zero.npy": (by_hand(head % ("<f8", "(0, 9223372036854775807, 9223372036854775807)")), "too-large",
                                     "more elements than the limit", "No elements, but lengths whose product overflows."),
        "length-past-64-bits.npy": (by_hand(head % ("<f8", "(99999999999999999999,)")), "bad-file", "whole number",
                                    "A length that no integer of the machine holds."),
        "nine-axes.npy": (by_hand(head % ("<f8", "(1, 1, 1, 1, 1, 1, 1, 1, 1)"), bytes(8)), "too-large", "9 axes",
                          "One axis more than the limit."),
        "number-for-shape.npy": (by_hand(head % ("<f8", "(5)"), bytes(40)), "bad-file", "comma",
                                 "(5) is a number in Python, a shape of one axis is (5,)."),
        "code-in-shape.npy": (by_hand(head % ("<f8", "(__import__('os').getpid(),)"), bytes(8)), "bad-file",
                              "whole number", "A reader that evaluates the header would run this."),
        "code-behind-header.npy": (by_hand(head % ("<f8", "(1,)") + " or exit()", bytes(8)), "bad-file",
                                   "the end of the header", "Something behind the dictionary."),
        "duplicate-key.npy": (by_hand("{'descr': '<f8', 'descr': '<f4', 'fortran_order': False, 'shape': (1,), }", bytes(8)),
                              "bad-file", 'second "descr"', "Python keeps the last of two equal keys, others the first."),
        "unknown-key.npy": (by_hand("{'descr': '<f8', 'fortran_order': False, 'shape': (1,), 'unit': 'us'}", bytes(8)),
                            "bad-file", "no key but", "The format has three keys."),
        "missing-key.npy": (by_hand("{'descr': '<f8', 'shape': (1,), }", bytes(8)), "bad-file", "the keys descr",
                            "Without fortran_order the axes could be in either order."),
        "escaped-type.npy": (by_hand("{'descr': '\\x3cf8', 'fortran_order': False, 'shape': (1,), }", bytes(8)), "bad-file",
                             "without escapes", "No type string needs an escape."),
        "no-byte-order.npy": (by_hand(head % ("|f8", "(1,)"), bytes(8)), "bad-file", "no byte order",
                              "A float of eight bytes has an order, and it is not stated."),
        "signed-size.npy": (by_hand(head % ("<f+8", "(1,)"), bytes(8)), "bad-file", "no size", "A size with a sign."),
        "text-of-no-length.npy": (by_hand(head % ("<U0", "(268435456,)")), "bad-file", "no size",
                                  "Two hundred and sixty-eight million empty texts from 80 bytes."),
        "objects.npy": (by_hand(head % ("|O", "(1,)"), b"\x80\x04N."), "unsupported", "Python objects",
                        "Pickled objects run code when they are read."),
        "structured.npy": (array_bytes(np.zeros(2, [("re", "<f4"), ("im", "<f4")])), "unsupported", "structured",
                           "Real and imaginary parts as named parts of one element."),
        "long-double.npy": (array_bytes(np.zeros(2, np.longdouble)), "unsupported", "16 bytes",
                            "The 16 bytes of a long double differ from machine to machine."),
        "dates.npy": (array_bytes(np.array(["2026-01-01"], "<M8[ns]")), "unsupported", "<M8[ns]", "Dates are not numbers."),
        "cut-short.npz": (stored[:-80], "bad-file", "ends without a readable directory", "The directory at the end is cut."),
        "trailing-bytes.npz": (stored + b"more", "bad-file", "bytes follow the end", "Four bytes behind the archive."),
        "duplicate-name.npz": (every(npz({"note": fields["note"], "nota": fields["note"]}), b"nota.npy", b"note.npy"),
                               "bad-file", "twice", "Two members of one name: which one counts depends on the program."),
        "wrong-checksum.npz": (changed(stored, 200, bytes([stored[200] ^ 1])), "bad-file", "checksum",
                               "One bit of the signal is turned over."),
        "encrypted.npz": (changed(changed(stored, 6, b"\x01"), directory + 8, b"\x01"), "unsupported", "encrypted",
                          "The first member is marked as encrypted."),
        "bzip2.npz": (npz(fields, method=zipfile.ZIP_BZIP2), "unsupported", "method 12", "Packed by a method NumPy does not use."),
        "bomb.npz": (npz({"signal": np.zeros(1 << 20, "<f8")}, method=zipfile.ZIP_DEFLATED), "too-large", "200:1",
                     "8 KiB that unpack to 8 MiB."),
        "size-overstated.npz": (stored[:directory] + changed(stored[directory:], 24, struct.pack("<I", 5000)), "bad-file",
                                "does not unpack to the 5000 bytes", "The directory states more than the member holds."),
        "not-an-array.npz": (archive([("signal.npy", b"delay,signal\r\n")]), "bad-file", "signal byte 0",
                             "A text under the name of an array."),
        "objects.npz": (archive([("signal.npy", by_hand(head % ("|O", "(1,)"), b"\x80\x04N."))]), "unsupported",
                        "Python objects", "Pickled objects run code when they are read."),
        "no-members.npz": (archive([]), "bad-file", "found nothing", "An archive without arrays."),
        "207-gradients.npz": (npz({**wide, "gradient_mT_per_m": wide["gradient_mT_per_m"][:207]}), "bad-file",
                              "207 gradients for 208 shots", "One gradient is missing."),
        "permuted-axes.npz": (npz({**fields, "signal": fields["signal"].transpose(2, 1, 0)}), "bad-file",
                              "shape [16, 5, 2] found; 2 delays and 5 gradients want [2, 5, sample]",
                              "[sample, shot, delay] instead of [delay, shot, sample]."),
        "no-delays.npz": (npz({k: v for k, v in fields.items() if k != "delay_us"}), "bad-file", "missing delay_us; found ",
                          "A required field is not there."),
        "nan-in-signal.npz": (npz({**fields, "signal": np.where(fields["signal"] == 33 - 31j, np.nan, fields["signal"])}),
                              "bad-file", "1 of 160 values are NaN or infinite, the first at delay 0 shot 2 sample 11", "Values that are no numbers."),
        "text-for-number.npz": (npz({**fields, "dwell_ns": np.array("4 ns")}), "bad-file", "text found", "A number with its unit as text."),
        "real-traces.npz": (npz({**fields, "signal": fields["signal"].real}), "bad-file", "traces are complex",
                            "Only the real part of quadrature traces."),
        "unknown-role.npz": (npz({**fields, "shot_role": np.array([0, 0, 1, 0, 7])}), "bad-file", "7 at shot 4",
                             "A role that does not exist."),
    }
    return cases


def main():
    for name, data in family().items():
        (HERE / "numpy" / name).write_bytes(data)
    for name, (data, kind, words, why) in malformed().items():
        (HERE / "malformed" / name).write_bytes(data)
        (HERE / "malformed" / (name + ".why.txt")).write_text(f"{kind}\n{words}\n\n{why}\n")


main()
