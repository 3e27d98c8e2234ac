"""Time of one curve of the wound strip: from width, wood and needles to the corrected velocity.

Run by hand:

    python tests/benchmarks/wound_curve.py

Prints the median milliseconds of a curve of a width not seen before, beside the goal of 10 ms.
Speed is never asserted.
"""

import statistics
import sys
import time
from dataclasses import replace

from sapflux.physics.wound_strip import Strip, curve

GOAL_MS = 10.0
ROUNDS = 50


def main():
    strip = Strip(width=2.0e-3, diffusivity=2.5e-7)
    curve(strip)  # warm
    taken = []
    for number in range(ROUNDS):
        other = replace(strip, width=1.7e-3 + number * 2.6e-5)
        start = time.perf_counter()
        curve(other)
        taken.append(1e3 * (time.perf_counter() - start))
    print(f"one curve {statistics.median(taken):.2f} ms, goal {GOAL_MS:.0f} ms")
    return 0


if __name__ == "__main__":
    sys.exit(main())
