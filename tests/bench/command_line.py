"""How long the command line takes to answer ``--help`` and the built-in example, against a bare interpreter.

Run: ``python tests/bench/command_line.py``. Best of five, whole processes, interleaved.
"""

import subprocess
import sys
import time

COMMANDS = {
    "bare interpreter": [sys.executable, "-c", "pass"],
    "dec --help": [sys.executable, "-m", "dec", "--help"],
    "dec demo": [sys.executable, "-m", "dec", "demo"],
}


def main() -> None:
    """Print the best time of each command and its distance from the bare interpreter."""
    best = dict.fromkeys(COMMANDS, float("inf"))
    for _ in range(5):
        for name, words in COMMANDS.items():
            start = time.perf_counter()
            subprocess.run(words, stdout=subprocess.DEVNULL, check=True)
            best[name] = min(best[name], time.perf_counter() - start)
    for name, seconds in best.items():
        print(f"{name:18s} {seconds:6.3f} s   {seconds - best['bare interpreter']:+.3f} s")


if __name__ == "__main__":
    main()
