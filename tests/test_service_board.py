"""What people and programs are told about a folder."""

import base64
import hashlib
import json
import re
import shutil
import subprocess
import time
from html import escape, unescape
from pathlib import Path
from urllib.parse import unquote

import pytest

from ledgersolve.service.board import (
    as_text,
    boot,
    exit_code,
    gather,
    health,
    stale_after,
    status,
    sweep_beacons,
    write_board,
)
from ledgersolve.service.disk import Disk
from ledgersolve.service.holder import describe
from ledgersolve.service.layout import Layout, prepare
from ledgersolve.service.page import render
from tests.service_share import names

HOSTILE = ["<script>alert(1)</script>", "{{7*7}}", "%s%n", '"><img src=x onerror=alert(1)>', "a&b", "U+202Egpj"]


def picture(**changes) -> dict:
    """What one process says of itself."""
    entry = {"name": "plan.xlsx", "job": "J", "host": "h", "stage": "search", "best": 120.0, "saving": 20.0}
    told = {
        "id": "one", "host": "h", "pid": 1, "boot": boot(), "version": "1", "workers": 2, "state": "at work",
        "why": "", "last_scan": "2026-01-02T03:04:05+00:00", "last_scan_unix": time.time(),
        "monotonic": time.monotonic(), "scan_took": 0.01, "scans": 5, "stale_after_seconds": 60.0,
        "waiting": [{"name": "next.xlsx", "owner": "ann", "why": "number 1 in the queue"}], "waiting_count": 1,
        "running": [entry | {"elapsed": 12.0, "left": 100.0}],
        "returned": [{"name": "old.xlsx", "returned": "old [X] solved.xlsx", "outcome": "solved", "job": "I",
                      "at": "2026-01-02T03:00:00+00:00", "verdict": "proven best", "total_cost": 1234.5}],
        "alerts": [],
    }
    return told | changes


@pytest.fixture
def layout(tmp_path):
    """A served folder."""
    prepare(tmp_path, Disk())
    return Layout(tmp_path)


def write(layout: Layout, **changes) -> None:
    """One process writes its board."""
    told = picture(**changes)
    write_board(layout, Disk(), layout.hosts / f"{told['id']}.json", told)


def test_the_board_is_written_whole(layout):
    """Page and data are replaced at once; nothing is left in tmp."""
    write(layout)
    write(layout)
    assert names(layout.tmp) == []
    data = json.loads((layout.folder / "status.json").read_text())
    assert data["running"][0]["saving"] == 20.0
    assert "at most 20.00 could be saved" in (layout.folder / "Status.html").read_text()


def test_page_and_data_have_the_rights_of_the_folder(layout):
    """In a folder for one group nobody else reads what workbooks cost."""
    for mode, wanted in ((0o2770, 0o660), (0o2750, 0o640)):
        layout.folder.chmod(mode)
        write(layout)
        for name in ("Status.html", "status.json"):
            assert (layout.folder / name).stat().st_mode & 0o7777 == wanted


def test_the_board_shows_all_services(layout):
    """Two processes on one folder: what each runs stands on the page of either, what both see only once."""
    alert = {"name": "x", "why": "a link"}
    write(layout, id="two", running=[picture()["running"][0] | {"name": "theirs.xlsx"}], alerts=[alert])
    write(layout, id="one", alerts=[alert])
    state = gather(layout, Disk())
    assert {one["name"] for one in state["running"]} == {"plan.xlsx", "theirs.xlsx"}
    assert len(state["services"]) == 2 and len(state["alerts"]) == len(state["returned"]) == 1


def test_a_dead_service_is_seen_as_dead(layout):
    """Health is 0 with a fresh scan, 1 with an old one, after a good end and with no service, 2 elsewhere."""
    assert health(layout.folder) == 1
    write(layout)
    assert health(layout.folder) == 0
    write(layout, monotonic=time.monotonic() - 61.0)
    assert health(layout.folder) == 1
    write(layout, state="stopped")
    assert health(layout.folder) == 1
    for state in ("suspended", "held"):
        write(layout, state=state)
        assert health(layout.folder) == 1
    for state in ("paused", "quiet hours"):
        write(layout, state=state)
        assert health(layout.folder) == 0
    assert health(layout.folder / "Inbox") == 2


def test_health_does_not_rest_on_the_date(layout):
    """On the machine itself a clock that is years off changes nothing."""
    if not boot():
        pytest.skip("this system does not name its boots")
    write(layout, last_scan_unix=time.time() + 3.15e8)
    assert health(layout.folder) == 0
    write(layout, last_scan_unix=time.time() - 3.15e8)
    assert health(layout.folder) == 0


def test_the_state_of_a_killed_service_follows_its_silence(layout):
    """What it last said of itself no longer counts: no sign of life, its jobs start again, the code is 1."""
    write(layout, monotonic=time.monotonic() - 73.0, last_scan_unix=time.time() - 73.0)
    state = status(layout.folder)
    assert state["state"] == "no sign of life" and state["running"] == [] and exit_code(state) == 1
    assert [one["name"] for one in state["waiting"]] == ["plan.xlsx", "next.xlsx"] and state["waiting_count"] == 2
    assert as_text(state).startswith("Service: no sign of life (the last complete look at Inbox was 73 s ago)")
    assert "plan.xlsx: taken; starts again when the service does" in as_text(state)


def test_a_service_that_stopped_does_not_hide_one_that_lives(layout):
    """Of two, the one that looked last was stopped: the folder is at work all the same."""
    write(layout, id="live", last_scan_unix=time.time() - 3.0)
    write(layout, id="stopped", state="stopped", running=[])
    state = status(layout.folder)
    assert state["state"] == "at work" and state["well"]


def test_what_another_service_runs_does_not_wait(layout):
    """A job that one service holds is listed once: as running there, not as taken and waiting here."""
    taken = {"name": "plan.xlsx", "owner": "ann", "why": "taken by h", "job": "J"}
    write(layout, id="two")
    write(layout, id="one", running=[], waiting=[taken], waiting_count=1, last_scan_unix=time.time() + 1.0)
    state = gather(layout, Disk())
    assert [one["job"] for one in state["running"]] == ["J"]
    assert state["waiting"] == [] and state["waiting_count"] == 0


def test_an_account_without_rights_reads_the_file_for_everybody(layout, monkeypatch):
    """The service's own folder is closed to it: status.json tells, judged by the time of now."""

    def closed(self, *, follow_symlinks=True):
        if ".ledgersolve" in self.parts:
            raise PermissionError(13, "Permission denied", str(self))
        return real(self, follow_symlinks=follow_symlinks)

    real = Path.stat
    write(layout)
    monkeypatch.setattr(Path, "stat", closed)
    state = status(layout.folder)
    assert exit_code(state) == 0 and [one["name"] for one in state["running"]] == ["plan.xlsx"]
    old = json.loads((layout.folder / "status.json").read_text())
    old["services"][0] |= {"monotonic": time.monotonic() - 90.0, "last_scan_unix": time.time() - 90.0}
    (layout.folder / "status.json").write_text(json.dumps(old))
    state = status(layout.folder)
    assert exit_code(state) == 1 and state["state"] == "no sign of life" and state["running"] == []
    (layout.folder / "status.json").unlink()
    state = status(layout.folder)
    assert exit_code(state) == 3 and "this account may not read" in as_text(state)
    json.dumps(state)


def test_each_state_has_its_exit_code(layout):
    """0 looked after, 1 not, or out of reach, 2 never served, 3 not for this account; the same with --health."""
    assert exit_code(status(layout.folder / "gone")) == 1
    assert "is not there" in as_text(status(layout.folder / "gone"))
    assert exit_code(status(layout.folder / "Inbox")) == 2
    write(layout)
    assert exit_code(status(layout.folder)) == health(layout.folder) == 0


def test_another_machines_service_is_judged_by_date(layout):
    """Elsewhere only the dates can be compared."""
    write(layout, boot="another", monotonic=0.0)
    assert health(layout.folder) == 0
    write(layout, boot="another", monotonic=time.monotonic(), last_scan_unix=time.time() - 100.0)
    assert health(layout.folder) == 1


def test_a_live_service_makes_up_for_a_dead_one(layout):
    """One of two is enough; the dead one's running jobs are not shown as running."""
    write(layout, id="dead", monotonic=time.monotonic() - 500.0, last_scan_unix=time.time() - 500.0)
    write(layout, id="live", running=[])
    state = status(layout.folder)
    assert state["well"] and state["running"] == []


def test_signs_of_life_of_ended_services_are_swept(layout):
    """One that stopped in good order and one known to be dead go; others stay."""
    write(layout, id="stopped", state="stopped")
    write(layout, id="dead", holder=describe() | {"started": "1"})
    write(layout, id="elsewhere", holder={"host": "x", "pid": 1})
    write(layout, id="here", holder=describe())
    sweep_beacons(layout, Disk())
    left = ["elsewhere.json", "here.json"] + (["dead.json"] if "place" not in describe() else [])
    assert names(layout.hosts) == sorted(left)


def test_damaged_signs_of_life_are_passed_over(layout):
    """Garbage in the hosts folder hides nothing else."""
    (layout.hosts / "x.json").write_bytes(b"\xff{")
    (layout.hosts / "y.json").write_text("[1]")
    write(layout)
    assert status(layout.folder)["well"]


def test_three_missed_scans_are_too_many():
    """With slow scans more patience, never less than a minute."""
    assert stale_after(5.0) == 60.0
    assert stale_after(30.0) == 90.0


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_names_are_shown_literally(text):
    """In every place of the page a name is text: no tag, no attribute, no template."""
    waiting = {"name": text, "owner": text, "why": text}
    told = picture(why=text, waiting=[waiting], alerts=[{"name": text, "why": text}])
    told["running"][0] |= {"name": text, "stage": text, "host": text}
    fault = {"sheet": text, "cell": text, "found": text, "remedy": text}
    told["returned"][0] |= {"name": text, "returned": text, "outcome": "to fix", "first_fault": fault, "faults": 1}
    page = render(told)
    assert "<script" not in page and "<img" not in page
    tags = set(re.findall(r"<([a-z0-9]+)", page))
    known = {"html", "head", "meta", "title", "style", "body", "h1", "h2", "div", "p", "b", "ul", "li", "span", "a"}
    assert tags <= known
    assert unescape(page).lower().count(text.lower()) >= 10
    (link,) = re.findall(r'<a href="([^"]*)">', page)
    assert re.fullmatch(r"Returned/[\w.~%-]+", link) and unquote(link) == f"Returned/{text}"


def test_the_page_allows_nothing_but_its_own_style():
    """The policy names the hash of the one style sheet and forbids all else; only returned files are linked."""
    page = render(picture())
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', page)[1]
    style = re.search(r"<style>(.*?)</style>", page, re.DOTALL)[1]
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    assert policy.startswith(f"default-src 'none'; style-src 'sha256-{digest}'")
    assert "unsafe" not in policy
    assert not re.search(r"\b(src|style|on\w+)=", page)
    assert re.findall(r"href=\S*", page) == ['href="Returned/old%20%5BX%5D%20solved.xlsx">old']


def test_nothing_is_said_of_savings_while_nothing_is_proven():
    """A job without a bound has a best cost and no word on what could be saved, on the page and the terminal."""
    told = picture()
    told["running"][0]["saving"] = None
    for text in (render(told), as_text(told)):
        assert "best cost so far 120.00" in text and "could be saved" not in text


def test_whose_a_workbook_is_stands_everywhere():
    """Two files of one name: sub-folder or account tell them apart where they wait, run, came back or are stuck."""
    told = picture()
    for key in ("running", "waiting", "returned"):
        told[key][0]["owner"] = "north"
    told["alerts"] = [{"name": "x", "owner": "north", "why": "a link"}]
    page = render(told)
    assert page.count("from north") == 3 and page.count("for north, 2026-01-02") == 1
    assert as_text(told).count("(north)") == 4


def test_what_is_to_be_fixed_is_listed_once_and_pushes_nothing_away():
    """Thirty faulty workbooks: four of them with their first fault, then the solved ones."""
    fault = {"sheet": "Resources", "cell": "B4", "found": "needs 44.6, has 42.", "remedy": "give Press more."}
    broken = {"returned": "b [X] to fix.xlsx", "outcome": "to fix", "faults": 2, "first_fault": fault,
              "at": "2026-01-02T03:00:00+00:00"}
    told = picture()
    told["returned"] += [broken] * 30
    page = render(told)
    assert page.count("b [X] to fix.xlsx") == 4 and "and 26 more" in page
    assert "2 to fix, the first: Resources B4: needs 44.6, has 42. Give Press more." in page


def test_texts_on_the_page_are_sentences():
    """No leading colon, no double stop; a proven plan is not said to be above the best possible."""
    fault = {"sheet": "", "cell": "", "found": "the file is empty (0 bytes)", "remedy": "copy the file again"}
    told = picture()
    told["returned"][0] |= {"gap_pct": 0.001}
    told["returned"].append({"returned": "e.xlsx", "outcome": "to fix", "faults": 1, "first_fault": fault})
    page = render(told)
    assert "The file is empty (0 bytes). Copy the file again.</div>" in page
    assert "proven best, total cost 1,234.50<" in page
    told["returned"][1]["first_fault"] = fault | {"found": "word " * 100, "remedy": "Did you mean EUR?"}
    assert f"Word {'word ' * 30}word … Did you mean EUR?</div>" in render(told)
    told["returned"][0]["verdict"] = "best found"
    assert "at most 0.001 % above the best possible" in render(told)


def test_the_page_does_not_say_that_all_is_well_by_its_colour():
    """A dead service leaves its last page behind: only trouble has a colour, the time tells the rest."""
    page = render(picture())
    assert '<div class="pulse"><p><b>At work</b> at the last complete look at Inbox: <b>2026-01-02' in page
    assert "border-left: .4rem solid var(--soft)" in page


def test_the_page_tells_when_it_is_stale():
    """A static page cannot know that the service died: it shows when it last looked and how to read that."""
    page = render(picture(stale_after_seconds=90.0))
    assert "2026-01-02 03:04:05 (UTC+00:00)" in page
    assert "more than 2 minutes ago, the service is not running" in page
    assert '<meta http-equiv="refresh" content="10">' in page


def test_a_browser_shows_hostile_names_as_text_and_runs_nothing(tmp_path):
    """Headless Chromium loads the page: no script, no image, no error of the policy, the names as text."""
    browser = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
    if browser is None:
        pytest.skip("no Chromium here")
    page = tmp_path / "Status.html"
    waiting = [{"name": text, "owner": "a", "why": text} for text in HOSTILE]
    page.write_text(render(picture(waiting=waiting, waiting_count=len(waiting))))
    profile = tmp_path / "profile"
    profile.mkdir()
    command = [
        browser, "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
        "--disable-background-networking", "--disable-component-update", "--disable-sync", "--enable-logging=stderr",
        f"--user-data-dir={profile}", "--dump-dom", page.as_uri(),
    ]  # fmt: skip
    shown = subprocess.run(command, capture_output=True, text=True, timeout=120, check=False)
    if "</html>" not in shown.stdout:
        pytest.skip("Chromium does not start here")
    assert "<script" not in shown.stdout and "<img" not in shown.stdout
    for text in HOSTILE:
        assert escape(text, quote=False) in shown.stdout
    assert "CONSOLE" not in shown.stderr


def test_a_long_queue_is_counted_not_listed(layout):
    """Ten thousand waiting: the first are listed, the rest is a number."""
    waiting = [{"name": f"{number}.xlsx", "owner": "a", "why": "w"} for number in range(300)]
    write(layout, waiting=waiting, waiting_count=10_000)
    page = (layout.folder / "Status.html").read_text()
    assert "and 9,975 more" in page and page.count("<li>") < 40


def test_a_folder_that_was_never_served_is_told_as_such(tmp_path):
    """No traceback, no guess: words, for the terminal and for programs."""
    state = status(tmp_path)
    assert not state["well"] and "never served" in as_text(state)
    json.dumps(state)


def test_the_terminal_gets_the_same_facts(layout):
    """The text of the command names what runs, waits and came back."""
    write(layout)
    text = as_text(status(layout.folder))
    for words in (
        "plan.xlsx: search, for 12 s, best cost so far 120.00", "next.xlsx (ann): number 1 in the queue",
        "old [X] solved.xlsx",
    ):  # fmt: skip
        assert words in text
