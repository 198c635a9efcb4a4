"""How long the whole job and a bare start take, each as a ratio to a peer in the same run."""

import subprocess
import sys
import time
from pathlib import Path

from etflux import workbook
from etflux.run import run_case

EXAMPLE = Path(__file__).parents[2] / "station_examples" / "harrowbend.xlsx"


def _seconds(*arguments):
    start = time.perf_counter()
    subprocess.run([sys.executable, *arguments], check=True, capture_output=True)
    return time.perf_counter() - start


def test_whole_run(benchmark):
    """The chain on the example against reading the example: both are dominated by Python, not by the machine."""
    start = time.perf_counter()
    case, findings = workbook.checked(EXAMPLE)
    reading = time.perf_counter() - start
    results = benchmark.pedantic(run_case, args=(case, findings), rounds=1, iterations=1)
    print(f"\nwhole chain over reading and checking: {(time.perf_counter() - start - reading) / reading:.1f}")
    assert results.stand.sizes["date"] == 183


def test_import_time(benchmark):
    """``import etflux`` and the command's help against a bare interpreter."""
    bare = min(_seconds("-c", "pass") for _ in range(3))
    quick = min(_seconds("-c", "import etflux") for _ in range(3))
    shown = min(_seconds("-m", "etflux.cli", "--help") for _ in range(3))
    benchmark.pedantic(_seconds, args=("-c", "import etflux"), rounds=1, iterations=1)
    print(f"\nover a bare interpreter: import etflux {quick / bare:.2f}, etflux --help {shown / bare:.2f}")
    assert shown > 0.5 * bare
