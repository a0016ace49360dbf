#!/usr/bin/env python3
"""Time numpy beside this package's benchmarks: the density of HDB3 and of 8b/10b at 1001 frequencies.

Run it from anywhere in the module:  python3 builtins/spectrum/bench/beside.py

numpy takes its best route: the chain's autocovariance from block moments, then a sum of cosines. The powers of the
transition matrix are taken one by one or by doubling, whichever is faster, and every time is the best of many runs. Both
sides start from the code's tables (next state and symbols of every state and word) and end with 1001 densities of
full-width pulses from 0 to twice the symbol rate. For a further train of the same code both keep what they know of its
symbols: numpy the autocovariance, so that the sum of cosines is left. BLAS runs on one thread; with these sizes more
threads are no faster (set OPENBLAS_NUM_THREADS to see).
"""

import json
import os
import re
import subprocess
import sys
import time

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
import numpy as np

HERE = os.path.dirname(os.path.abspath(__file__))
NU = np.linspace(0, 2, 1001)


def moments(following, out):
    """Stationary law, transition matrix and block moments of equiprobable words."""
    states, words = following.shape
    length = out.shape[2]
    step = np.bincount((np.arange(states)[:, None] * states + following).ravel(), minlength=states * states)
    step = step.reshape(states, states) / words
    balance = step.T - np.eye(states)
    balance[-1] = 1
    right = np.zeros(states)
    right[-1] = 1
    pi = np.linalg.solve(balance, right)
    leaving = out.mean(axis=1)
    mean = pi @ leaving
    leaving = leaving - mean
    centred = (out - mean).reshape(-1, length)
    weight = np.repeat(pi / words, words)
    weighed = centred * weight[:, None]
    inside = centred.T @ weighed
    entering = np.zeros((states, length))
    for k in range(length):
        entering[:, k] = np.bincount(following.ravel(), weighed[:, k], minlength=states)
    return step, leaving, entering, inside


def one_by_one(step, leaving, entering):
    v, blocks = leaving, []
    while np.abs(v).max() > 1e-16:
        blocks.append(entering.T @ v)
        v = step @ v
    return np.array(blocks)


def doubling(step, leaving, entering):
    v, power = leaving[None], step
    while np.abs(v[-1]).max() > 1e-16:
        v = np.concatenate([v, power @ v])
        power = power @ power
    return entering.T @ v


def autocovariance(following, out, powers):
    length = out.shape[2]
    step, leaving, entering, inside = moments(following, out)
    blocks = powers(step, leaving, entering)
    lags = np.zeros(length * (len(blocks) + 1))
    for l in range(length):
        lags[l] = np.trace(inside, offset=l)
    if len(blocks):
        k = np.arange(length)
        at = length * (1 + np.arange(len(blocks)))[:, None, None] + k[None, None, :] - k[None, :, None]
        lags += np.bincount(at.ravel(), blocks.ravel(), minlength=len(lags))
    lags /= length
    return lags[: np.flatnonzero(np.abs(lags) > 1e-16 * lags[0])[-1] + 1]


def cosine_sum(lags):
    cosines = np.cos(2 * np.pi * NU[:, None] * np.arange(1, len(lags)))
    return (lags[0] + 2 * cosines @ lags[1:]) * np.sinc(NU) ** 2


def best(run, seconds=1.5):
    least, end = float("inf"), time.perf_counter() + seconds
    while time.perf_counter() < end:
        start = time.perf_counter()
        run()
        least = min(least, time.perf_counter() - start)
    return least * 1e6


def ours():
    """Best times of this package's benchmarks, by the benchmark and the code's name."""
    command = ["go", "test", "-run", "^$", "-bench", "(First|Next)1001/(HDB3|8b)", "-count", "5", "."]
    text = subprocess.run(command, cwd=os.path.dirname(HERE), check=True, capture_output=True, text=True).stdout
    times = {}
    for work, name, ns in re.findall(r"^Benchmark(\w+)1001/(.+?)(?:-\d+)?\s+\d+\s+([\d.]+) ns/op", text, re.M):
        times[work, name] = min(times.get((work, name), float("inf")), float(ns) / 1e3)
    return times


def check(name, code, got):
    """The race means nothing unless numpy gets the right densities: compare at the reference's frequencies on the grid."""
    for nu, want in zip(code["nu"], code["psd"]):
        k = round(nu / NU[1])
        if k < len(NU) and abs(NU[k] - nu) < 1e-12 and abs(got[k] - want) > 1e-9:
            sys.exit(f"{name}: numpy gives {got[k]} at {nu}, want {want}")


def main():
    with open(os.path.join(HERE, "..", "testdata", "reference.json")) as f:
        codes = {c["id"]: c for c in json.load(f)["codes"]}
    threads = os.environ["OPENBLAS_NUM_THREADS"]
    print(f"numpy {np.__version__}, Python {sys.version.split()[0]}, BLAS on {threads} thread(s), {os.cpu_count()} processors; microseconds, best of many runs")
    here = ours()
    for name, key in [("HDB3", "hdb3_p50"), ("8b/10b", "8b10b_p50")]:
        following = np.array(codes[key]["definition"]["next"])
        out = np.array(codes[key]["definition"]["out"], dtype=float)
        whole = {}
        for route in (one_by_one, doubling):
            check(name, codes[key], cosine_sum(autocovariance(following, out, route)))
            whole[route.__name__] = best(lambda: cosine_sum(autocovariance(following, out, route)))
        lags = autocovariance(following, out, doubling)
        rows = [
            ("from the tables", min(whole.values()), here["First", name]),
            ("a further train", best(lambda: cosine_sum(lags)), here["Next", name]),
        ]
        for what, numpy, go in rows:
            print(f"{name:7} {what:20} numpy {numpy:7.0f}   here {go:7.0f}   ratio {numpy / go:5.1f}")
        print(f"{name:7} powers of the transition matrix one by one {whole['one_by_one']:.0f}, by doubling {whole['doubling']:.0f}; {len(lags)} lags")


main()
