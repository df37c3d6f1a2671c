"""Runs the programs beside this module, which need processes, forks, tracers or mounts of their own."""

import json
import os
import subprocess
import sys

from tests.service_share import ROOT


def program(name: str, *words: str, before: tuple[str, ...] = (), seconds: int = 280) -> dict:
    """Run a program of this folder and give what it prints."""
    command = [*before, sys.executable, "-m", f"tests.faults.{name}", *words]
    environment = {**os.environ, "PYTHONDONTWRITEBYTECODE": "1"}
    done = subprocess.run(
        command, capture_output=True, text=True, timeout=seconds, env=environment, cwd=ROOT, check=False
    )
    assert done.returncode == 0, done.stderr[-2000:]
    return json.loads(done.stdout.splitlines()[-1])
