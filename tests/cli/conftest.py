"""The command line, called as a person would, without a process of its own."""

import sys
from types import SimpleNamespace

import pytest

from dic_cli.main import main


@pytest.fixture
def tauten(monkeypatch, capsys):
    """Return a function that runs a command line and returns its exit status and what it printed."""

    def call(*arguments, cwd=None):
        if cwd is not None:
            monkeypatch.chdir(cwd)
        monkeypatch.setattr(sys, "argv", ["tauten", *map(str, arguments)])
        with pytest.raises(SystemExit) as left:
            main()
        said, complained = capsys.readouterr()
        return SimpleNamespace(returncode=left.value.code, stdout=said, stderr=complained)

    return call
