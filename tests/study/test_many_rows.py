"""Two million rows from a Parquet file take no more memory than a few batches do."""

import json
import subprocess
import sys
from pathlib import Path

import pytest


@pytest.mark.slow
def test_memory_does_not_grow_with_the_rows():
    command = [sys.executable, "-m", "tests.study.many_rows", "2000000"]
    done = subprocess.run(command, capture_output=True, text=True, check=True, cwd=Path(__file__).parents[2])
    assert json.loads(done.stdout.splitlines()[-1])["mib"] < 512
