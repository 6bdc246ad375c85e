"""Long fuzzing by hand: ``python tests/hostile/fuzz.py --minutes 10 [--only NAME] [--seed N]``.

Goes through all targets in turn, each time with other mutations, and prints every fault with the
mutations that show it. Exit status 1 if there was any.
"""

from __future__ import annotations

import argparse
import random
import sys
import tempfile
import time
import traceback
from collections import Counter
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[2]))

from tests.hostile.mutations import KINDS, PIECES, Mutation
from tests.hostile.targets import TARGETS, Target, TooSlow, try_file

BATCH = 200


def draw(dice: random.Random) -> list[Mutation]:
    """One to three mutations."""
    return [
        Mutation(
            dice.choice(KINDS),
            dice.randrange(10**6),
            dice.randrange(10**6),
            dice.choice(PIECES) if dice.random() < 0.8 else dice.randbytes(dice.randrange(7)),
        )
        for _ in range(dice.randrange(1, 4))
    ]


def fuzz(target: Target, path: Path, dice: random.Random, count: Counter, faults: set) -> None:
    """One file of a target; faults are told apart by the place in the sources where they show."""
    steps = draw(dice)
    path.write_bytes(target.spoil(target.seed, steps))
    count[target.name, "cases"] += 1
    try:
        count[target.name, "read"] += try_file(target, path)
    except (Exception, TooSlow) as error:
        last = traceback.extract_tb(error.__traceback__)[-1]
        where = f"{target.name}: {type(error).__name__} in {last.filename}:{last.lineno}"
        count[target.name, "faulty"] += 1
        if where not in faults:
            faults.add(where)
            text = "".join(traceback.format_exception(error)[-6:])
            print(f"\n{where}\n{steps}\n{text[:3000]}", flush=True)


def main() -> int:
    """Fuzz until the time is up."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--minutes", type=float, default=10.0)
    parser.add_argument("--only", help="name of one target")
    parser.add_argument("--seed", type=int, default=int(time.time()))
    options = parser.parse_args()
    targets = [one for one in TARGETS if options.only in (None, one.name)]
    dice, count, faults = random.Random(options.seed), Counter(), set()
    end = time.monotonic() + 60.0 * options.minutes
    with tempfile.TemporaryDirectory() as folder:
        while time.monotonic() < end:
            for target in targets:
                for _ in range(BATCH // target.cost):
                    fuzz(target, Path(folder) / "file", dice, count, faults)
    for target in targets:
        cases, read, bad = (count[target.name, key] for key in ("cases", "read", "faulty"))
        print(f"{target.name:15} {cases:8} cases, {read:8} read, {bad:6} faulty")
    print(f"{len(faults)} different faults; seed {options.seed}")
    return bool(faults)


if __name__ == "__main__":
    sys.exit(main())
