"""The API is started as its settings say, and not open by accident."""

import os
import subprocess
import sys

import pytest

from tests.house.files import ROOT


@pytest.mark.parametrize("host", ["127.0.0.1", "0.0.0.0"])
@pytest.mark.parametrize("no_auth", [{}, {"HOURWRIGHT_NO_AUTH": "false"}], ids=["unsaid", "denied"])
def test_it_does_not_start_unless_told_that_openness_is_meant(host: str, no_auth: dict[str, str]) -> None:
    outcome = subprocess.run(
        [sys.executable, "-m", "service.serve"],
        cwd=ROOT,
        env={**os.environ, "HOURWRIGHT_HOST": host, "HOURWRIGHT_PORT": "0", **no_auth},
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert (outcome.returncode, outcome.stdout) == (2, "")
    (line,) = outcome.stderr.splitlines()
    assert line.startswith("hourwright serve: this version has no API keys yet: ")
    assert "HOURWRIGHT_NO_AUTH=true" in line
