"""Nanoseconds per device evaluation: NumPy, the core one point at a time, the core in lanes, in one
run.

``python -m baselines.speed CARGO`` in the folder of the tests runs the core's example ``speed`` for
the core's numbers. All on one core; the best of many runs. NumPy evaluates blocks that fit its
caches best (the size is tried out). The equations of the BSIM4 row are those of ``bsim4_numpy.py``:
channel, GIDL of both ends, both gate edges, both junctions; the core computes tunnelling to the
channel besides.
"""

from __future__ import annotations

import json
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import bsim4_numpy as b4
import numpy as np
import test_bsim4_independent as bsim4_test
import test_compact_independent as compact_test
from hushrail import _core

from baselines import compact_numpy as cn

W, L, AREA, PERIMETER = 0.8e-6, 70e-9, 0.12e-12, 1.9e-6
POINTS = 16384


def best_ns(run: Callable[[b4.Array, b4.Array, b4.Array], object], points: b4.Array) -> float:
    """The best time of a point over block sizes and runs."""
    best = float("inf")
    for size in (512, 1024, 2048, 4096, 16384):
        vg, vd, vb = (np.ascontiguousarray(x) for x in points[:size].T)
        for _ in range(max(10, 400_000 // size)):
            start = time.perf_counter()
            run(vg, vd, vb)
            best = min(best, (time.perf_counter() - start) / size)
    return best * 1e9


def main(cargo: str) -> None:
    """Measure and print."""
    random = np.random.default_rng(7)
    points = random.uniform([-0.6, 0.02, -1.0], [1.1, 1.1, 0.1], (POINTS, 3))
    with tempfile.TemporaryDirectory() as folder:
        cards, compact, biases = (Path(folder) / n for n in ("cards.lib", "compact.json", "biases.csv"))
        text = bsim4_test.CARD.replace("rsh=9", "rsh=0")
        cards.write_text(text, encoding="utf-8")
        compact.write_text(json.dumps({"polarity": "n"} | compact_test.CARD), encoding="utf-8")
        np.savetxt(biases, points[:512], delimiter=",")
        words = [cargo, "run", "--quiet", "--release", "--package", "hushrail", "--example", "speed", "--"]
        words += [str(cards), "nt", str(compact), str(biases)]
        core = json.loads(subprocess.run(words, check=True, capture_output=True, text=True).stdout)
        p = _core.Process.read("tt", [str(cards)]).effective("nt", {"w": W, "l": L})
    s = b4.sizes(p, W, L, 300.15)
    d = cn.Device(compact_test.CARD, W, L, AREA, PERIMETER, 300.15)
    k = cn.constants(d)

    def bsim4_numpy(vg: b4.Array, vd: b4.Array, vb: b4.Array) -> None:
        b4.channel(p, s, vg, vd, vb)
        b4.gidl(p, s, vg, vd, vb)
        b4.gidl(p, s, vg, np.zeros_like(vd), vb)
        b4.gate_edge(p, s, vg - vd, "d")
        b4.gate_edge(p, s, vg, "s")
        b4.junction(p, s, AREA, PERIMETER, vb - vd)
        b4.junction(p, s, AREA, PERIMETER, vb)

    numpy_ns = {
        "BSIM4": best_ns(bsim4_numpy, points),
        "compact": best_ns(lambda vg, vd, vb: cn.mechanisms(d, k, vg, vd, vb), points),
    }
    heads = ("NumPy", "alone", "in lanes", "NumPy/alone", "NumPy/lanes")
    print("ns per evaluation   " + "".join(f"{head:>13}" for head in heads))
    for name, ns in numpy_ns.items():
        alone, lanes = core[name]["alone"], core[name]["lanes"]
        print(f"{name:20}" + "".join(f"{x:13.1f}" for x in (ns, alone, lanes, ns / alone, ns / lanes)))


if __name__ == "__main__":
    main(sys.argv[1])
