"""Handlers that stand in for the real job, so that faults of the service are provoked in milliseconds."""

import ctypes
import os
import time
import zipfile
from pathlib import Path
from types import SimpleNamespace


def _answer(source: Path, into: Path, outcome: str, words: dict) -> SimpleNamespace:
    returned = into / f"{outcome}.xlsx"
    with zipfile.ZipFile(returned, "w") as package:
        package.writestr("[Content_Types].xml", "<Types/>")
        package.writestr("from.txt", source.read_bytes()[-2000:])
        package.writestr("random.txt", os.urandom(16).hex())  # a second answer is another answer
    told = {"file": source.name, "outcome": outcome, "returned": str(returned), "title": "A title of its own"}
    return SimpleNamespace(as_json=lambda: told | words)


def solve(source, into, *, progress=None, cancelled=None, shown_name=None, limit_known=None):
    """Answer at once; what the file says inside decides how."""
    with zipfile.ZipFile(source) as package:
        word = package.read("word.txt").decode() if "word.txt" in package.namelist() else ""
    if word == "polite":
        limit_known(0.1)
        while not cancelled():
            time.sleep(0.02)
    return WORDS.get(word.partition(" ")[0], _solved)(source, into, word, progress, limit_known)


def _solved(source, into, word, progress, limit_known):
    return _answer(source, into, "solved", {"verdict": "proven best", "total_cost": 1.0})


def _slow(source, into, word, progress, limit_known):
    seconds = float(word.split()[1])
    limit_known(seconds)
    began = time.monotonic()
    while (spent := time.monotonic() - began) < seconds:
        progress(SimpleNamespace(stage="search", best=120.0 - spent, bound=100.0, seconds=spent))
        time.sleep(min(0.05, seconds))
    return _solved(source, into, word, progress, limit_known)


def _fix(source, into, word, progress, limit_known):
    fault = {"severity": "error", "sheet": "Sites", "cell": "B3", "found": "text", "remedy": "enter a number"}
    return _answer(source, into, "to fix", {"problems": [fault]})


def _crash(source, into, word, progress, limit_known):
    ctypes.string_at(0)


def _quit(source, into, word, progress, limit_known):
    os._exit(int(word.split()[1]))


def _hang(source, into, word, progress, limit_known):
    limit_known(0.2)
    time.sleep(3600)


def _glutton(source, into, word, progress, limit_known):
    hoard = []
    while True:
        hoard.append(bytearray(64 << 20))


def _chatter(source, into, word, progress, limit_known):
    os.write(1, b"garbage \xff\xfe\n" * 20000)
    os.write(2, b"x" * 3_000_000)
    return _solved(source, into, word, progress, limit_known)


def _nonsense(source, into, word, progress, limit_known):
    return SimpleNamespace(as_json=lambda: {"outcome": "wonderful", "returned": "/etc/hostname"})


def _half(source, into, word, progress, limit_known):
    answer = _solved(source, into, word, progress, limit_known)
    returned = Path(answer.as_json()["returned"])
    returned.write_bytes(returned.read_bytes()[:-7])
    return answer


def _outside(source, into, word, progress, limit_known):
    return SimpleNamespace(as_json=lambda: {"outcome": "solved", "returned": str(source)})


def _without(source, into, word, progress, limit_known):
    return SimpleNamespace(as_json=lambda: {"outcome": "failed", "returned": None}, reason="The audit differs.")


def _fault(source, into, word, progress, limit_known):
    os.write(2, b"KeyError: 'the cause'\n")
    return _answer(source, into, "failed", {})


def _passing(source, into, word, progress, limit_known):
    """The machine gets in the way at the first two tries; their number is kept beside the private folders."""
    tries = into.parent.parent / "tries"
    tries.write_text(tries.read_text() + "x" if tries.exists() else "x")
    if len(tries.read_text()) >= int(word.split()[1]):
        return _solved(source, into, word, progress, limit_known)
    answer = _answer(source, into, "failed", {})
    return SimpleNamespace(as_json=answer.as_json, reason="The machine got in the way (full). Go.", may_pass=True)


WORDS = {
    "slow": _slow, "fix": _fix, "crash": _crash, "quit": _quit, "hang": _hang, "glutton": _glutton,
    "chatter": _chatter, "nonsense": _nonsense, "half": _half, "outside": _outside, "without": _without,
    "fault": _fault, "passing": _passing,
}
