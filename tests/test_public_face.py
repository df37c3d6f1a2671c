"""What programs may import, and what importing costs."""

import subprocess
import sys
from importlib.metadata import version
from pathlib import Path

import pytest

import ledgersolve


def test_every_exported_name_is_there() -> None:
    """``__all__`` is what the package gives, each name importable."""
    for name in ledgersolve.__all__:
        assert getattr(ledgersolve, name) is not None
    assert set(ledgersolve._HOMES) | {"__version__"} == set(ledgersolve.__all__)


def test_other_names_are_refused() -> None:
    """A name that is not exported is an attribute error like any other."""
    with pytest.raises(AttributeError, match="no attribute 'solve_everything'"):
        _ = ledgersolve.solve_everything


def test_importing_loads_no_solver() -> None:
    """The package itself costs nothing; OR-Tools comes with the first solve."""
    code = "import ledgersolve, sys; print('ortools' in sys.modules, 'numpy' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["False", "False"]


def test_the_version_is_the_one_of_the_package() -> None:
    """One version everywhere: code, metadata, changelog."""
    changelog = Path(__file__).parent.parent / "CHANGELOG.md"
    assert f"## {ledgersolve.__version__}" in changelog.read_text("utf-8")
    assert version("ledgersolve") == ledgersolve.__version__
