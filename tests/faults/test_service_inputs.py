"""Bad inputs of every kind, dropped into a served folder with the real job behind it."""

import os
import re
import socket
import zipfile
from pathlib import Path

import pytest

from ledgersolve.service.board import status
from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import prepare
from ledgersolve.service.verify import verify
from ledgersolve.service.watch import serve
from tests.faults.service_inputs import HEAVY, INPUTS, good
from tests.service_share import names, quick_settings


def outcome(name: str) -> tuple[str, str]:
    """The drop's name and the outcome, from a returned name."""
    head, _, tail = name.rpartition(" [")
    return head, tail.partition("] ")[2].rpartition(".")[0]


SAMPLE = [*list(INPUTS)[::5], "25 macro", *(name for name in INPUTS if name.startswith(("37", "39")))]


@pytest.mark.parametrize("chosen", [
    pytest.param(SAMPLE, id="a sample", marks=[pytest.mark.slow, pytest.mark.timeout(300)]),
    pytest.param(list(INPUTS | HEAVY), id="all", marks=[pytest.mark.long, pytest.mark.timeout(1800)]),
])  # fmt: skip
def test_bad_inputs_come_back_and_harm_nobody(tmp_path, chosen):
    """Hostile and broken files at once: each ends as it should, the good ones between are solved."""
    inputs = {name: (INPUTS | HEAVY)[name] for name in chosen}
    folder = tmp_path / "served"
    folder.mkdir()
    prepare(folder, Disk())
    inbox = folder / "Inbox"
    for name, made in inputs.items():
        safe = name.replace("/", "\u2215")
        made.write(tmp_path / f"made{made.suffix}")
        (tmp_path / f"made{made.suffix}").rename(inbox / f"{safe}{made.suffix}")
    for number in range(3):
        good(inbox / f"good {number}.xlsx", cost=100.0 + number)
    server = _add_what_is_no_file(folder)
    (tmp_path / "outside.xlsx").write_bytes((inbox / "good 0.xlsx").read_bytes())
    os.link(tmp_path / "outside.xlsx", inbox / "43 hard link.xlsx")
    before = (tmp_path / "outside.xlsx").read_bytes()
    settings = quick_settings(workers=2, long_quiet_seconds=0.2, beat_seconds=2.0, scan_seconds=0.5)
    code = serve(folder, once=True, settings=settings)
    server.close()

    assert code == 1, "what is no file must have been left"
    ends: dict[str, list[str]] = {}
    for name in names(folder / "Returned"):
        drop, end = outcome(name)
        ends.setdefault(drop, []).append(end)
    wrong = []
    for name, made in inputs.items():
        shown = name.replace("/", "\u2215").replace("<", "_").replace(">", "_")
        shown += "" if made.suffix in (".xlsx", ".xlsm") else made.suffix
        if len(ends.get(shown, [])) != 1 or ends[shown][0] not in made.outcomes:
            wrong.append(f"{name}: {ends.get(shown)} instead of {made.outcomes}")
    assert wrong == []
    assert [ends[f"good {number}"] for number in range(3)] == [["solved"]] * 3
    assert ends["43 hard link"] == ["solved"]
    assert (tmp_path / "outside.xlsx").read_bytes() == before
    left = ["41 link.xlsx", "41 loop.xlsx", "42 folder.xlsx", "42 pipe.xlsx", "42 socket.xlsx"]
    assert names(inbox) == [*left, "~$x.xlsx"]
    assert {alert["name"] for alert in status(folder)["alerts"]} == set(left)
    assert [fault for fault in verify(folder, settled=True) if not fault.startswith("not settled: Inbox")] == []
    assert "evil.txt" not in "".join(str(path) for path in tmp_path.rglob("*"))
    _look_at_the_returned(folder)


def _add_what_is_no_file(folder: Path) -> socket.socket:
    inbox = folder / "Inbox"
    (inbox / "41 link.xlsx").symlink_to("/etc/hostname")
    (inbox / "41 loop.xlsx").symlink_to(inbox / "41 loop.xlsx")
    os.mkfifo(inbox / "42 pipe.xlsx")
    (inbox / "42 folder.xlsx").mkdir()
    (inbox / "~$x.xlsx").write_bytes(b"Ann")
    server = socket.socket(socket.AF_UNIX)
    here = Path.cwd()
    os.chdir(inbox)  # the path of a socket may have 108 bytes only
    try:
        server.bind("42 socket.xlsx")
    finally:
        os.chdir(here)
    return server


def _look_at_the_returned(folder: Path) -> None:
    """Macros are kept as bytes, hostile text is text, and the page shows it literally."""
    by_name = {outcome(name)[0]: folder / "Returned" / name for name in names(folder / "Returned")}
    assert by_name["25 macro"].suffix == ".xlsm"
    with zipfile.ZipFile(by_name["25 macro"]) as package:
        assert package.read("xl/vbaProject.bin") == b"\xd0\xcfmacro bytes"
    for number in range(3):
        with zipfile.ZipFile(by_name[f"37 formula text {number}"]) as package:
            sheets = b"".join(package.read(name) for name in package.namelist() if "worksheets/" in name)
            formulas = re.findall(rb"<f[^>]*>([^<]*)", sheets)
        assert formulas
        assert not [text for text in formulas if b"cmd" in text or b"SUM(1)" in text or text == b"+1"]
    page = (folder / "Status.html").read_text()
    assert "<script" not in page and "<b>%s" not in page
