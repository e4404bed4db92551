"""How long `smallbody --help` takes, against an interpreter that does nothing.

    python tests/bench/bench_start.py [repeats]

The target is 0.5 s of wall time; what makes it long is an import that belongs inside a function.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import time

COMMANDS = {
    "python -c pass": ["-c", "pass"],
    "smallbody --help": ["-m", "smallbody.cli", "--help"],
    "smallbody drift --help": ["-m", "smallbody.cli", "drift", "--help"],
}


def seconds(arguments: list[str], repeats: int) -> list[float]:
    """Wall time of each repeat of an interpreter with these arguments, s."""
    taken = []
    for _ in range(repeats):
        began = time.perf_counter()
        subprocess.run([sys.executable, *arguments], check=True, stdout=subprocess.DEVNULL)
        taken.append(time.perf_counter() - began)
    return taken


def main() -> None:
    """Print median and best wall time of each command, and its ratio to doing nothing."""
    repeats = int(sys.argv[1]) if len(sys.argv) > 1 else 15
    nothing = None
    for name, arguments in COMMANDS.items():
        taken = seconds(arguments, repeats)
        middle = statistics.median(taken)
        nothing = nothing or middle
        print(f"{name:24} median {middle:.3f} s, best {min(taken):.3f} s, {middle / nothing:.1f} times doing nothing")


if __name__ == "__main__":
    main()
