"""Run the benchmarks: `python tests/bench/run.py [PART …] [--quick]`, or all.

The tables go to stdout, in Markdown; what is being done goes to stderr. `--quick` takes a small sample, to
see that everything runs. Nothing here is collected by pytest.
"""

import argparse
import os
import sys
from pathlib import Path

TESTS = Path(__file__).resolve().parent.parent
PARTS = (
    "pitch",
    "speed",
    "registers",
    "quality",
    "drawing",
    "faults",
    "hostile",
    "compare",
    "split",
    "forecast",
)


def main() -> None:
    """Run the asked parts in turn."""
    parser = argparse.ArgumentParser(description="Run the benchmarks; the tables go to stdout.")
    parser.add_argument("parts", nargs="*", metavar="PART", help=f"of {', '.join(PARTS)}; all by default")
    parser.add_argument("--quick", action="store_true", help="a small sample of everything")
    asked = parser.parse_args()
    unknown = set(asked.parts) - set(PARTS)
    if unknown:
        parser.error(f"no such part: {', '.join(sorted(unknown))}")
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # its threads spin on products as small as ours
    sys.path[:0] = [str(TESTS), str(TESTS.parent / "samples")]
    _run([part for part in PARTS if part in (asked.parts or PARTS)], full=not asked.quick)


def _run(parts: list[str], *, full: bool) -> None:
    from importlib import import_module

    from bench.tables import made_with

    _say(made_with())
    for part in parts:
        print(f"Running: {part}", file=sys.stderr, flush=True)
        _say(f"## {part.capitalize()}")
        import_module(f"bench.bench_{part}").report(full=full, say=_say)


def _say(text: str) -> None:
    print(f"{text}\n", flush=True)


if __name__ == "__main__":
    main()
