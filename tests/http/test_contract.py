"""Generated requests against the live server: whatever is sent, the answer is one that the description promises."""

import subprocess
import sys
from pathlib import Path

import pytest

EXAMPLES = 20
# A document may have the right shape and still be refused for its names, formulas, units or conditions.
LEFT_OUT = "positive_data_acceptance"
# Lists that are too long may make a body that is too large as a whole: 413.
SETTINGS = """
[checks.negative_data_rejection]
expected-statuses = [400, 401, 403, 404, 405, 406, 409, 413, 415, 422, 428, 429]
"""


@pytest.mark.slow
def test_answers_keep_what_is_promised(server, tmp_path):
    (tmp_path / "schemathesis.toml").write_text(SETTINGS)
    command = [
        Path(sys.executable).with_name("schemathesis"),
        "run",
        f"{server.address}/api/v1/openapi.json",
        f"--max-examples={EXAMPLES}",
        "--exclude-path-regex=/events$",  # an endless answer; see test_events.py
        f"--exclude-checks={LEFT_OUT}",
        "--request-timeout=60",
        "--seed=1",
        "--no-color",
    ]
    done = subprocess.run(command, capture_output=True, text=True, timeout=600, check=False, cwd=tmp_path)
    assert done.returncode == 0, done.stdout[-20_000:]
