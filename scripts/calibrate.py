"""How far fvcheck's numbers can be trusted: measured on fields that are known exactly.

    python scripts/calibrate.py [--short] [--only NAME …] [--size NAME …] [--count N] [--json FILE]

Each cell of the study is a field, a mesh kind, a location of the data (point values
or cell averages), a precision and a mesh size; in each, random control surfaces are
balanced with `fvcheck.balance`. The exact imbalance is zero, so what is reported is
the error, given relative to the row's scale:

    deg 1, 2, 3  median error by polynomials of that degree (1 is plain linear sampling)
    error, 95 %  median and 95th percentile of the reported imbalance
    band, res.band  median sampling and resolution band
    cover        share of surfaces whose error lies in the sampling band
    worst        largest error over its band
    b/e          median band over median error
    gain         median error of degree 1 over that of the reported imbalance
    open         false alarms: surfaces called `open` at the default tolerance
    deg3         share of the surface that degree 3 was used on
    0.5 %        share of planted sources of 0.5 % of throughflow called `open` at a tolerance of 0.1 %
    able         surfaces whose resolution band is less than that; of these: sources found there
    smallest     smallest planted source, as a share of throughflow, called `open` in 95 of 100
                 at the default tolerance
"""

from __future__ import annotations

import argparse
import json
import sys
import time
from pathlib import Path

import numba
from calibration.measure import measure
from calibration.report import header, line, misses, summary
from calibration.suite import SIZES, UNDER, settings


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--only", nargs="+", default=[], help="fields, mesh kinds, locations or precisions")
    parser.add_argument("--size", nargs="+", default=[], choices=[*SIZES, UNDER])
    parser.add_argument("--count", type=int, default=200, help="control surfaces per cell of the study")
    parser.add_argument("--plants", type=int, default=100, help="trials with a planted source; 0 for none")
    parser.add_argument("--seed", type=int, default=0)
    parser.add_argument("--json", type=Path, help="write all records to this file")
    parser.add_argument("--short", action="store_true", help="12 surfaces, two sizes, no float32, no plants")
    told = parser.parse_args()
    # The arrays of one control surface are too small to share out.
    numba.set_num_threads(1)
    if told.short:
        told.size, told.count, told.plants = told.size or ["middle", UNDER], 12, 0
        told.only.append("float64")
    began, records = time.perf_counter(), []
    print(header())
    for setting in settings(tuple(told.only), tuple(told.size)):
        start = time.perf_counter()
        new = measure(setting, told.count, told.plants, told.seed)
        records += new
        print(f"{' · '.join(setting.key)} · {new[0]['cells']} cells · {time.perf_counter() - start:.1f} s")
        for record in new:
            print(line(record), flush=True)
        if told.json:
            told.json.write_text(json.dumps({"records": records, "misses": misses(records)}, indent=1))
    print(f"\n{len(records)} rows in {time.perf_counter() - began:.0f} s")
    print("\n".join(summary(records)))
    missed = misses(records)
    print(f"\n{len(missed)} misses")
    print("\n".join(missed))
    return 0


if __name__ == "__main__":
    sys.exit(main())
