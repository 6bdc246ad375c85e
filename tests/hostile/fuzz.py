"""Long fuzzing by hand: ``python tests/hostile/fuzz.py --minutes 10``.

Goes through all targets in turn, each time from another seed, and prints every fault with the file
that shows it. Exit status 1 if there was any.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
import time
import traceback
from collections import Counter
from pathlib import Path

from hypothesis import HealthCheck, Phase, given, seed, settings

sys.path.insert(0, str(Path(__file__).parents[2]))

from tests.hostile.mutations import mutations, spoil
from tests.hostile.targets import TARGETS, Target, try_file

BATCH = 500


def fuzz(target: Target, path: Path, number: int, count: Counter, faults: dict) -> None:
    """One batch of a target; faults by the place in the sources where they showed."""

    @seed(number)
    @settings(
        max_examples=BATCH, deadline=None, database=None, phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )  # fmt: skip
    @given(mutations)
    def run(steps):
        data = spoil(target.seed, steps)
        path.write_bytes(data)
        count[target.name, "cases"] += 1
        try:
            count[target.name, "read"] += try_file(target, path)
        except Exception as error:
            last = traceback.extract_tb(error.__traceback__)[-1]
            where = f"{target.name}: {type(error).__name__} in {last.filename}:{last.lineno}"
            count[target.name, "faults"] += 1
            if where not in faults:
                faults[where] = data
                print(f"\n{where}\n{steps}\n{''.join(traceback.format_exception(error)[-6:])}")

    run()


def main() -> int:
    """Fuzz until the time is up."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--minutes", type=float, default=10.0)
    parser.add_argument("--only", help="name of one target")
    parser.add_argument("--seed", type=int, default=int(time.time()))
    options = parser.parse_args()
    targets = [one for one in TARGETS if options.only in (None, one.name)]
    count, faults, number = Counter(), {}, options.seed
    end = time.monotonic() + 60.0 * options.minutes
    with tempfile.TemporaryDirectory() as folder:
        while time.monotonic() < end:
            for target in targets:
                number += 1
                fuzz(target, Path(folder) / "file", number, count, faults)
    for target in targets:
        cases, read, bad = (count[target.name, key] for key in ("cases", "read", "faults"))
        print(f"{target.name:15} {cases:8} cases, {read:8} read, {bad:6} faulty")
    print(f"{len(faults)} different faults")
    return bool(faults)


if __name__ == "__main__":
    sys.exit(main())
