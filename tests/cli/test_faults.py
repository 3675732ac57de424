"""slackwater faults: what cannot be flown is told before anything is flown. .ci/run flies the whole."""

from __future__ import annotations

import pytest

from pyharness.cli.main import main
from pyharness.faults import FAULTS


def test_the_names_are_listed(capsys):
    assert main(["faults", "--only", "help"]) == 0
    assert capsys.readouterr().out.split() == sorted(fault.name for fault in FAULTS)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (["--only", "MAG_MISSING,nothing"], "--only: no fault NOTHING; --only help lists them"),
        (["--without", "help"], "--without: no fault HELP; --only help lists them"),
        (["--false-alarms", "0"], "--false-alarms: 0, must be in [1, 100000]"),
        (["--bits", "--controller", "exact"], "--bits: exact is too slow for it, must be c or lib:PATH"),
        (["nowhere.toml"], "nowhere.toml"),
    ],
)
def test_what_cannot_be_flown_is_told(capsys, options, message):
    assert main(["faults", *options]) == 2
    assert message in capsys.readouterr().err
