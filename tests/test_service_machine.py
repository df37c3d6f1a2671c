"""What the machine lets the service use."""

import psutil

from ledgersolve.service.machine import memory_bytes, processors


def groups(tmp_path, files: dict[str, str], own: str = "0::/a.slice/b.service\n"):
    """A tree of control groups and the word on which one is ours."""
    for name, content in files.items():
        (tmp_path / "groups" / name).parent.mkdir(parents=True, exist_ok=True)
        (tmp_path / "groups" / name).write_text(content)
    (tmp_path / "own").write_text(own)
    return tmp_path / "groups", tmp_path / "own"


def test_the_least_limit_above_counts_as_memory(tmp_path):
    """A limit of the unit, of its slice, or the soft one, whichever is least; "max" is none."""
    found = {"a.slice/b.service/memory.max": "max\n", "a.slice/memory.max": "900000000\n", "memory.max": "2000000000"}
    assert memory_bytes(*groups(tmp_path, found)) == 900_000_000
    assert memory_bytes(*groups(tmp_path, {"a.slice/b.service/memory.high": "800000000\n"})) == 800_000_000


def test_a_container_sees_its_limit_at_the_root(tmp_path):
    """Inside one the own group is the root of what is seen."""
    assert memory_bytes(*groups(tmp_path, {"memory.max": "700000000\n"}, "0::/\n")) == 700_000_000


def test_the_older_form_of_groups_is_understood(tmp_path):
    """One tree for memory; other trees say nothing about it."""
    found = {"memory/x/memory.limit_in_bytes": "600000000\n", "pids/x/memory.limit_in_bytes": "5\n"}
    assert memory_bytes(*groups(tmp_path, found, "4:memory:/x\n3:pids:/x\n0::/\n")) == 600_000_000


def test_without_limits_the_machine_counts(tmp_path):
    """No file, no group: all of its memory and at least one processor."""
    nowhere = tmp_path / "none"
    assert memory_bytes(nowhere, nowhere) == psutil.virtual_memory().total
    assert processors(nowhere, nowhere) >= 1


def test_a_quota_of_processors_is_rounded_up(tmp_path):
    """Half a processor is one place to solve; a quota above the machine's number adds none."""
    assert processors(*groups(tmp_path, {"a.slice/b.service/cpu.max": "50000 100000\n"})) == 1
    many = groups(tmp_path, {"a.slice/b.service/cpu.max": "99900000 100000\n"})
    assert processors(*many) == processors(tmp_path / "none", tmp_path / "none")
