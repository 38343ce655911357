"""Call the command line in this process and catch what it prints and its exit code."""

import sys

import pytest

from planner import cli


def planner(monkeypatch: pytest.MonkeyPatch, capsys, *arguments: object) -> tuple[int, str, str]:
    """Exit code, stdout and stderr of ``planner ARGUMENTS``."""
    monkeypatch.setattr(sys, "argv", ["planner", *(str(argument) for argument in arguments)])
    code = 0
    try:
        cli.main()
    except SystemExit as stop:
        code = 0 if stop.code is None else int(stop.code)
    out, err = capsys.readouterr()
    return code, out, err
