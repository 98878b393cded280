"""The README's worked example runs and prints what it says; its two commands are one line each."""

from __future__ import annotations

import contextlib
import io
import re
from pathlib import Path

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w+)\n(.*?)^```", README, re.DOTALL | re.MULTILINE)


def test_every_python_block_runs_and_every_text_block_is_what_the_one_before_prints() -> None:
    scope: dict[str, object] = {}
    printed, compared = "", 0
    for language, body in BLOCKS:
        if language == "python":
            buffer = io.StringIO()
            with contextlib.redirect_stdout(buffer):
                exec(body, scope)
            printed = buffer.getvalue()
        elif language == "text":
            assert printed == body
            compared += 1
    assert compared == 3


def test_the_two_commands_are_one_line_each_under_their_heading() -> None:
    section = README.split("## Two commands")[1].split("\n## ")[0]
    commands = re.findall(r"^```sh\n(.*?)^```", section, re.DOTALL | re.MULTILINE)
    assert [command.count("\n") for command in commands] == [1, 1]
    assert commands[0].strip().endswith("make demo")
    assert commands[1].strip().endswith("make test")
