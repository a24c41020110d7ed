"""How long commands take: with no kernels compiled yet, and later; and Python's own start beside.

    python -m benchmarks.startup [--cold 3] [--warm 15]

A copy of the package, as an installation leaves it (modules as byte code, no kernels), is run with
the Python that runs this.
"""

import argparse
import compileall
import os
import pathlib
import shutil
import subprocess
import sys
import tempfile

from benchmarks.timing import machine, measure

ROOT = pathlib.Path(__file__).resolve().parent.parent
TABLE = ROOT / "potentials" / "graded_well.csv"
# The most that is wanted, in seconds; that of --help is beyond Python's own start.
COLD, WARM, HELP = 6.0, 1.2, 0.15


def fresh_copy(folder):
    """Copy the package to an empty folder, with byte code but without compiled kernels."""
    shutil.rmtree(folder, ignore_errors=True)
    shutil.copytree(
        ROOT / "eigen1d", folder / "eigen1d", ignore=shutil.ignore_patterns("__pycache__")
    )
    compileall.compile_dir(folder, quiet=1)
    return folder


def command(folder, *arguments):
    """Run Python with the copy; its output is checked for success and thrown away."""
    inherited = {k: v for k, v in os.environ.items() if k != "NUMBA_CACHE_DIR"}
    subprocess.run(
        [sys.executable, *arguments],
        cwd=folder,
        env=inherited | {"PYTHONPATH": str(folder)},
        stdout=subprocess.DEVNULL,
        check=True,
    )


def main(argv=None):
    """Print a row a command, then what was wanted and what was measured."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cold", type=int, default=3, help="runs that compile")
    parser.add_argument("--warm", type=int, default=15, help="runs of each other command")
    args = parser.parse_args(argv)
    print(machine(), end="\n\n")
    levels = ("-m", "eigen1d", "levels", str(TABLE))
    with tempfile.TemporaryDirectory() as scratch:
        folder = pathlib.Path(scratch) / "copy"
        times = {
            "first levels": measure(
                lambda folder: command(folder, *levels),
                lambda: fresh_copy(folder),
                budget=0.0,
                least=args.cold,
                warm_up=False,
            )
        }
        for name, arguments in {
            "later levels": levels,
            "--help": ("-m", "eigen1d", "--help"),
            "python -c pass": ("-c", "pass"),
        }.items():
            times[name] = measure(
                lambda arguments=arguments: command(folder, *arguments), budget=0.0, least=args.warm
            )
    for name, timing in times.items():
        print(f"{name:16s} {timing!s:28s} {timing.runs} runs")
    beyond = times["--help"].median - times["python -c pass"].median
    print(f"\n{'seconds at most':34s} wanted  measured")
    for name, wanted, measured in (
        ("first levels", COLD, times["first levels"].median),
        ("later levels", WARM, times["later levels"].median),
        ("--help, beyond Python's own start", HELP, beyond),
    ):
        print(f"{name:34s} {wanted:6.2f}  {measured:8.3f}")


if __name__ == "__main__":
    main()
