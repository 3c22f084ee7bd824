"""Start-up time of `aquabuf --help` against importing click alone, whole processes in turn. Run by hand.

Goal: at most 5 times.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import time

RUNS = 9
OURS = [sys.executable, "-c", "from aquabuf.cli.main import main; main(['--help'])"]
CLICK = [sys.executable, "-c", "import click"]


def seconds(command: list[str]) -> float:
    """Wall time of one process."""
    start = time.perf_counter()
    subprocess.run(command, check=True, capture_output=True)
    return time.perf_counter() - start


def main() -> None:
    """Print both medians and the median of the ratios of neighboring runs."""
    pairs = [(seconds(OURS), seconds(CLICK)) for _ in range(RUNS)]
    ours, click = (statistics.median(column) for column in zip(*pairs, strict=True))
    ratio = statistics.median(a / b for a, b in pairs)
    print(f"aquabuf --help {ours * 1e3:.0f} ms, import click {click * 1e3:.0f} ms, ratio {ratio:.1f}")


if __name__ == "__main__":
    main()
