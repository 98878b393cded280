"""``python -m steelyard``: the demonstration with invented quays, as a page and a picture."""

from __future__ import annotations

import argparse
import io
import sys
from collections.abc import Sequence
from pathlib import Path

from steelyard.demo.page import compose_page
from steelyard.demo.picture import draw_picture
from steelyard.demo.scenarios import answer_all

__all__ = ["main"]


def main(arguments: Sequence[str] | None = None) -> int:
    """
    Print the demonstration and draw its picture.

    Parameters
    ----------
    arguments : sequence of str, optional
        Command line without the program's name; by default that of the process.

    Returns
    -------
    int
        Exit code: 0.
    """
    parser = argparse.ArgumentParser(
        prog="python -m steelyard",
        description="A demonstration on invented readings of invented quays: one fit, six "
        "changes, what they do to a decision, and which answers can be trusted.",
    )
    parser.add_argument(
        "--picture",
        type=Path,
        default=Path("steelyard-demo.png"),
        metavar="PATH",
        help="where to write the picture (default: %(default)s in the current folder)",
    )
    chosen = parser.parse_args(arguments)
    if isinstance(sys.stdout, io.TextIOWrapper):
        # A console without the sign ± must not end in a UnicodeEncodeError.
        sys.stdout.reconfigure(errors="replace")
    scenarios = answer_all()
    print(compose_page(scenarios))
    try:
        draw_picture(scenarios, chosen.picture)
    except ModuleNotFoundError as missing:
        if missing.name is None or missing.name.partition(".")[0] != "matplotlib":
            raise
        print("\nNo picture: matplotlib is missing. Install it with: pip install 'steelyard[plot]'")
    else:
        print(f"\nPicture: {chosen.picture}")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
