"""``python -m steelyard``: the demonstration with invented quays, as a page and a picture."""

from __future__ import annotations

import argparse
import io
import sys
from collections.abc import Sequence
from pathlib import Path

from steelyard.demo.how_far import compose_how_far
from steelyard.demo.page import compose_page
from steelyard.demo.picture import draw_picture
from steelyard.demo.scenarios import answer_all
from steelyard.errors import SteelyardError
from steelyard.planning import answer_plan

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
    parser.add_argument(
        "plan",
        nargs="?",
        type=Path,
        metavar="PLAN.toml",
        help="a scenario plan to answer from your own draws, instead of the demonstration",
    )
    parser.add_argument("--draws", type=Path, metavar="FILE", help="draws that the plan is for")
    parser.add_argument("--loglik", type=Path, metavar="FILE", help="their log likelihood")
    parser.add_argument(
        "--chain", metavar="NAME", help="what in a table of draws holds the chain of each"
    )
    parser.add_argument(
        "--table",
        type=Path,
        metavar="FILE",
        help="where to write the plan's table (default: beside the plan, as .csv)",
    )
    parser.add_argument(
        "--how-far",
        action="store_true",
        help="ten scenarios, a tipping point and its attribution, for the demonstration",
    )
    chosen = parser.parse_args(arguments)
    if isinstance(sys.stdout, io.TextIOWrapper):
        # A console without the sign ± must not end in a UnicodeEncodeError.
        sys.stdout.reconfigure(errors="replace")
    if chosen.plan is not None:
        return _answer_plan(parser, chosen)
    if chosen.how_far:
        print(compose_how_far())
        return 0
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


def _answer_plan(parser: argparse.ArgumentParser, chosen: argparse.Namespace) -> int:
    """Print and write the table of a plan; 2 where something cannot be read."""
    if chosen.draws is None:
        parser.error("a plan needs --draws FILE")
    try:
        found = answer_plan(chosen.plan, chosen.draws, chosen.loglik, chain=chosen.chain)
    except SteelyardError as error:
        print(f"{parser.prog}: {error}", file=sys.stderr)
        return 2
    print(found)
    path = chosen.table or chosen.plan.with_suffix(".csv")
    found.table().to_csv(path)
    print(f"\nTable: {path}")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
