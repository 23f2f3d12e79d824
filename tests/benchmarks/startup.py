"""What a short question costs: whole processes, against starting Python with numpy and click.

Run by hand: python tests/benchmarks/startup.py [ROUNDS]
"""

from __future__ import annotations

import sys
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

from logs import chain, write_lines
from processes import SEQMIX, run, table


def measure(rounds: int) -> None:
    source = chain(states=6, order=1, seed=41)
    with TemporaryDirectory() as folder:
        log = Path(folder) / "log.txt"
        write_lines(log, source.draw(1000, seed=42)[0])
        commands = {
            'python -c "import numpy, click"': (sys.executable, "-c", "import numpy, click"),
            "seqmix forecast, 1,000 rows": (*SEQMIX, "forecast", str(log)),
            "python -c pass": (sys.executable, "-c", "pass"),
            "seqmix --help": (*SEQMIX, "--help"),
        }
        seconds: dict[str, list[float]] = {name: [] for name in commands}
        for _ in range(rounds):
            for name, command in commands.items():
                seconds[name].append(run(*command).seconds)
    base = seconds['python -c "import numpy, click"']
    lines = []
    for name, some in seconds.items():
        ratios = [one / other for one, other in zip(some, base, strict=True)]
        lines.append([name, f"{median(some):.3f}", f"{min(some):.3f}", f"{median(ratios):.2f}x"])
    table(["whole process", "median seconds", "least", "against numpy and click, median of rounds"], lines)


if __name__ == "__main__":
    measure(int(sys.argv[1]) if len(sys.argv) > 1 else 21)
