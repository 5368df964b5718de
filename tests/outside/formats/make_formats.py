"""Writes one trajectory in many formats, with NumPy, SciPy, pandas, Polars, PyArrow, h5py, zstd.

Case thermal/cooling-body by an explicit Euler loop, 300 steps of 0.08 s, and the output `flux`.
Run with a Python that has these packages; `zstd` and `gzip` must be on the path.
"""

import gzip
import pathlib
import subprocess
import sys

import h5py
import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pyarrow.parquet as pq
import scipy.io

here = pathlib.Path(__file__).resolve().parent

rho, c_p, h_s, dia, t_0, t_a = 8500, 320, 210, 1e-3, 200, 20
tau = rho * c_p * dia / (6 * h_s)
step, steps = 0.08, 300
t = [0.0]
body = [float(t_0)]
for n in range(steps):
    body.append(body[-1] + step * (t_a - body[-1]) / tau)
    t.append((n + 1) * step)
t, body = np.array(t), np.array(body)
flux = h_s * (body - t_a) / 1000
n = np.arange(len(t), dtype=np.int32)
names = ["t", "body", "flux"]
table = np.column_stack([t, body, flux])


def at(name):
    return str(here / name)


text = ",".join(names) + "\n" + "".join(",".join("%.17g" % v for v in row) + "\n" for row in table)
(here / "euler.csv").write_text(text)

# Packed text.
raw = text.encode()
half = raw.index(b"\n", len(raw) // 2) + 1
(here / "one.csv.gz").write_bytes(gzip.compress(raw, mtime=0))
(here / "two.csv.gz").write_bytes(gzip.compress(raw[:half], mtime=0) + gzip.compress(raw[half:], mtime=0))


def zstd(data, *options):
    return subprocess.run(["zstd", "-q", "-c", *options], input=data, stdout=subprocess.PIPE, check=True).stdout


(here / "one.csv.zst").write_bytes(zstd(raw, "--no-check"))
(here / "checked.csv.zst").write_bytes(zstd(raw, "--check"))
skipped = b"\x50\x2a\x4d\x18" + (5).to_bytes(4, "little") + b"hello"
(here / "two.csv.zst").write_bytes(zstd(raw[:half], "--check") + skipped + zstd(raw[half:], "--check"))

# NumPy.
np.save(at("rows.npy"), table)
np.save(at("fortran.npy"), np.asfortranarray(table))
np.save(at("big.npy"), table.astype(">f8"))
np.save(at("single.npy"), table.astype("<f4"))
np.save(at("half.npy"), table.astype("<f2"))
records = np.zeros(len(t), dtype=[("t", "<f8"), ("body", "<f8"), ("flux", "<f8"), ("n", "<i4")])
records["t"], records["body"], records["flux"], records["n"] = t, body, flux, n
np.save(at("records.npy"), records)
aligned = np.zeros(len(t), dtype=np.dtype([("n", "<i4"), ("t", "<f8"), ("body", ">f8"), ("flux", "<f4")], align=True))
aligned["t"], aligned["body"], aligned["flux"], aligned["n"] = t, body, flux, n
np.save(at("aligned.npy"), aligned)
with open(at("version2.npy"), "wb") as file:
    np.lib.format.write_array(file, table, version=(2, 0))
with open(at("version3.npy"), "wb") as file:
    np.lib.format.write_array(file, table, version=(3, 0))
np.save(at("complex.npy"), table.astype("<c16")[:4])
np.savez(at("vectors.npz"), t=t, body=body, flux=flux.reshape(-1, 1), dt=step, note="Euler")
np.savez_compressed(at("deflated.npz"), t=t, body=body, flux=flux, n=n, short=t[:7])
np.savez(at("matrix.npz"), t=t, y=np.column_stack([body, flux]))
np.savez_compressed(at("lying.npz"), t=t.reshape(1, -1), y=np.vstack([body, flux]), z=np.asfortranarray(np.vstack([body, flux])))

# Parquet.
frame = pa.table({"t": t, "body": body, "flux": flux})
for name, options in {
    "snappy": dict(compression="snappy"),
    "none": dict(compression="none", use_dictionary=False),
    "gzip": dict(compression="gzip", row_group_size=100),
    "zstd": dict(compression="zstd", data_page_size=512, data_page_version="2.0"),
    "split": dict(compression="none", use_dictionary=False, column_encoding="BYTE_STREAM_SPLIT"),
    "crc": dict(compression="snappy", write_page_checksum=True),
}.items():
    pq.write_table(frame, at(f"{name}.parquet"), **options)
gaps = [None if i % 7 == 3 else float(v) for i, v in enumerate(body)]
mixed = pa.table({
    "t": t, "body": pa.array(gaps), "flux": flux.astype("f4"), "n": n, "up": flux > 10,
    "u": pa.array(n.astype("u4") + 4_000_000_000 - 0, pa.uint32()), "note": ["a"] * len(t),
    "when": pa.array(n.astype("i8"), pa.timestamp("us")), "list": [[1.0, 2.0]] * len(t),
})
pq.write_table(mixed, at("mixed.parquet"), row_group_size=120)
pl.DataFrame({"t": t, "body": body, "flux": flux}).write_parquet(at("polars.parquet"))
pd.DataFrame({"t": t, "body": body, "flux": flux}).to_parquet(at("pandas.parquet"))

# MATLAB.
plain = {"t": t, "body": body, "flux": flux}
scipy.io.savemat(at("plain.mat"), plain)
scipy.io.savemat(at("packed.mat"), plain, do_compression=True)
scipy.io.savemat(at("columns.mat"), plain, oned_as="column")
scipy.io.savemat(at("struct.mat"), {"run": {**plain, "note": "Euler", "deep": {"a": 1.0}}, "dt": step})
scipy.io.savemat(at("single.mat"), {k: v.astype("f4") for k, v in plain.items()}, do_compression=True)
scipy.io.savemat(at("odd.mat"), {
    **plain, "n": n, "y": table[:, 1:], "z": body + 1j, "note": "Euler", "cells": np.array([1, "a"], dtype=object),
    "cube": np.zeros((2, 2, 2)), "up": flux > 10, "sparse": scipy.sparse.eye(3).tocsc(),
}, do_compression=True)
scipy.io.savemat(at("version4.mat"), plain, format="4")

# HDF5.


def h5(name, fill, **options):
    with h5py.File(at(name), "w", **options) as file:
        fill(file)


def each(file, **options):
    for name, values in plain.items():
        file.create_dataset(name, data=values, **options)


h5("contiguous.h5", each)
h5("chunked.h5", lambda f: each(f, chunks=(64,), compression="gzip", shuffle=True))
h5("fletcher.h5", lambda f: each(f, chunks=(64,), fletcher32=True))
h5("latest.h5", lambda f: each(f, chunks=(64,), compression="gzip"), libver="latest")
h5("behind.h5", each, userblock_size=512)
h5("growing.h5", lambda f: each(f, chunks=(64,), maxshape=(None,)), libver="latest")


def big(f):
    for name, values in plain.items():
        f.create_dataset(name, data=values.astype(">f8"))


def single(f):
    for name, values in plain.items():
        f.create_dataset(name, data=values.astype("<f4"))
    f.create_dataset("n", data=n)


def groups(f):
    g = f.create_group("runs/first")
    each(g)
    g.create_dataset("y", data=table[:, 1:], chunks=(50, 2))


def compound(f):
    f.create_dataset("run", data=records)
    f["dt"] = step
    f["note"] = "Euler"


h5("big.h5", big)
h5("single.h5", single)
h5("groups.h5", groups)
h5("compound.h5", compound)
h5("lzf.h5", lambda f: each(f, chunks=(64,), compression="lzf"))

for module in (np, scipy, pd, pl, pa, h5py):
    print(module.__name__, module.__version__)
print("HDF5", h5py.version.hdf5_version, "Python", sys.version.split()[0])
