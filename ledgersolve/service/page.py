"""Status.html: one static page without a script, readable on a phone, that looks dead when the service is."""

import base64
import hashlib
import math
from datetime import datetime
from html import escape
from typing import Any
from urllib.parse import quote

_STYLE = """
:root { --ink: #17324d; --soft: #5a6b7b; --line: #d7dee5; --paper: #fbfaf7; --card: #ffffff;
  --good: #1d6b45; --fix: #9a4a00; --bad: #9b1c31; --run: #0b5c8a; }
@media (prefers-color-scheme: dark) {
  :root { --ink: #e8edf2; --soft: #a3b1bf; --line: #34424f; --paper: #131b23; --card: #1b2630;
    --good: #7fd1a5; --fix: #f0b072; --bad: #f08c9c; --run: #86c5ec; } }
* { box-sizing: border-box; }
body { margin: 0 auto; max-width: 76rem; padding: 1rem; background: var(--paper); color: var(--ink);
  font: 1rem/1.45 system-ui, sans-serif; }
h1 { font-size: 1.35rem; margin: 0 0 .25rem; }
h2 { font-size: 1.05rem; margin: 1.75rem 0 .5rem; }
.count { color: var(--soft); font-weight: normal; }
.pulse { background: var(--card); border: 1px solid var(--line); border-left: .4rem solid var(--soft);
  border-radius: .4rem; padding: .75rem 1rem; }
.pulse.held { border-left-color: var(--fix); }
.pulse p { margin: .2rem 0; }
.pulse b { white-space: nowrap; }
@media (min-width: 58rem) { .sides { display: grid; grid-template-columns: 1fr 1fr; gap: 0 2.5rem; } }
.soft { color: var(--soft); font-size: .9rem; }
ul { list-style: none; margin: 0; padding: 0; border-top: 1px solid var(--line); }
li { border-bottom: 1px solid var(--line); padding: .55rem 0; }
.name { font-weight: 600; overflow-wrap: anywhere; unicode-bidi: isolate; }
.what { overflow-wrap: anywhere; }
.mark { display: inline-block; min-width: 4.6rem; font-weight: 600; }
.solved { color: var(--good); } .fix { color: var(--fix); } .failed { color: var(--bad); }
.runs, a { color: var(--run); }
"""
_REFRESH_SECONDS = 10
_MOST_WAITING = 25
_MOST_TO_FIX = 4
_MOST_SOLVED = 15
_LONGEST_SENTENCE = 160
_PROVEN = "proven best"


def render(state: dict[str, Any]) -> str:
    """The whole page; every text from outside is escaped, nothing is loaded, nothing can run."""
    digest = base64.b64encode(hashlib.sha256(_STYLE.encode("utf-8")).digest()).decode("ascii")
    policy = f"default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"
    solved = [one for one in state["returned"] if one.get("outcome") == "solved"]
    fixes = [one for one in state["returned"] if one.get("outcome") != "solved"]
    waits = [_plain(one) for one in state["waiting"][:_MOST_WAITING]]
    alerts = [_plain(one) for one in state["alerts"]]
    parts = [
        _pulse(state),
        _section("Needs the administrator", alerts) if alerts else "",
        '<div class="sides"><div>',
        _section("Running now", [_running(one) for one in state["running"]]),
        _section("Waiting", waits, int(state["waiting_count"])),
        "</div><div>",
        _section("Needs fixing", [_fix(one) for one in fixes[:_MOST_TO_FIX]], len(fixes)),
        _section("Came back solved", [_solved(one) for one in solved[:_MOST_SOLVED]], len(solved)),
        "</div></div>",
    ]
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">'
        f'<meta http-equiv="refresh" content="{_REFRESH_SECONDS}">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        '<meta name="referrer" content="no-referrer">'
        f"<title>{_text(_headline(state))}</title><style>{_STYLE}</style></head><body>"
        + "\n".join(filter(None, parts))
        + "</body></html>\n"
    )


def _headline(state: dict[str, Any]) -> str:
    running, waiting = len(state["running"]), int(state["waiting_count"])
    return f"LedgerSolve: {running} running, {waiting} waiting"


def _pulse(state: dict[str, Any]) -> str:
    """Whether the service lives: the reader compares a printed time with the clock on the wall."""
    at_work = state["state"] == "at work"
    minutes = max(1, round(float(state["stale_after_seconds"]) / 60.0))
    unit = "minute" if minutes == 1 else "minutes"
    why = f"<p>{_text(state['why'])}</p>" if state["why"] else ""
    return (
        f"<h1>{_text(_headline(state))}</h1>"
        f'<div class="pulse{"" if at_work else " held"}">'
        f"<p><b>{_text(str(state['state']).capitalize())}</b> at the last complete look at Inbox: "
        f"<b>{_text(_time(state['last_scan']))}</b></p>{why}"
        f'<p class="soft">If that look is more than {minutes} {unit} ago, the service is not running: tell the '
        "administrator. Nothing that was dropped is lost. This page loads itself anew every "
        f"{_REFRESH_SECONDS} seconds.</p></div>"
    )


def _section(title: str, entries: list[str], count: int | None = None) -> str:
    number = len(entries) if count is None else count
    body = "".join(f"<li>{entry}</li>" for entry in entries)
    if number > len(entries):
        body += f'<li class="soft">and {number - len(entries):,} more</li>'
    body = body or '<li class="soft">nothing</li>'
    return f'<h2>{_text(title)} <span class="count">{number:,}</span></h2><ul>{body}</ul>'


def _plain(one: dict[str, Any]) -> str:
    owner = f'<div class="soft">from {_text(one["owner"])}</div>' if one.get("owner") else ""
    return f'<div class="name">{_text(one.get("name"))}</div><div class="what">{_text(one.get("why"))}</div>{owner}'


def running_words(one: dict[str, Any]) -> list[str]:
    """Where a running job stands. Nothing is said of what could be saved while nothing is proven."""
    words = [str(one.get("stage") or "reading"), f"for {_duration(float(one.get('elapsed') or 0.0))}"]
    if one.get("best") is not None:
        words.append(f"best cost so far {float(one['best']):,.2f}")
        if one.get("saving"):
            words.append(f"at most {_up(float(one['saving']), 2):,.2f} could be saved")
    if one.get("left") is not None:
        words.append(f"at most {_duration(float(one['left']))} left")
    return words


def _running(one: dict[str, Any]) -> str:
    stage, *rest = running_words(one)
    words = ", ".join([f'<span class="runs">{_text(stage)}</span>', *map(_text, rest)])
    place = f"from {one['owner']}, on {one.get('host')}" if one.get("owner") else f"on {one.get('host')}"
    return (
        f'<div class="name">{_text(one.get("name"))}</div><div class="what">{words}</div>'
        f'<div class="soft">{_text(place)}</div>'
    )


def _solved(one: dict[str, Any]) -> str:
    words = [str(one["verdict"])] if one.get("verdict") else []
    if one.get("total_cost") is not None:
        words.append(f"total cost {float(one['total_cost']):,.2f}")
    if one.get("gap_pct") and one.get("verdict") != _PROVEN:
        words.append(f"at most {_up(float(one['gap_pct']), 3):.3f} % above the best possible")
    return _returned(one, "solved", ", ".join(words))


def _fix(one: dict[str, Any]) -> str:
    first = one.get("first_fault") or {}
    words = [f"{int(one['faults']):,} to fix, the first:"] if int(one.get("faults") or 0) > 1 else []
    if first:
        where = " ".join(filter(None, (str(first.get("sheet") or ""), str(first.get("cell") or ""))))
        found = str(first.get("found") or "")
        words += [_sentence(f"{where}: {found}" if where else found), _sentence(str(first.get("remedy") or ""))]
    elif one.get("reason") or one.get("verdict"):
        words.append(_sentence(str(one.get("reason") or one["verdict"])))
    return _returned(one, "fix" if one.get("outcome") == "to fix" else "failed", " ".join(words))


def _returned(one: dict[str, Any], style: str, words: str) -> str:
    """A returned file: a link to it, how it came out, whose it is and since when it is there."""
    name = str(one.get("returned") or "")
    place = ", ".join(filter(None, (f"for {one['owner']}" if one.get("owner") else "", _time(one.get("at")))))
    return (
        f'<div class="name"><a href="Returned/{quote(name, safe="")}">{_text(name)}</a></div><div class="what">'
        f'<span class="mark {style}">{_text(one.get("outcome"))}</span> {_text(words)}</div>'
        f'<div class="soft">{_text(place)}</div>'
    )


def _sentence(text: str) -> str:
    """With a capital letter and one stop, cut where it is long."""
    bare = text.strip().rstrip(".")
    if len(bare) > _LONGEST_SENTENCE:
        bare = bare[:_LONGEST_SENTENCE].rsplit(" ", 1)[0] + " …"
    stop = "" if bare.endswith(("?", "!", "…")) else "."
    return f"{bare[0].upper()}{bare[1:]}{stop}" if bare else ""


def _up(figure: float, digits: int) -> float:
    """Rounded, never in our favour."""
    scale = 10.0**digits
    return math.ceil(figure * scale) / scale


def _duration(seconds: float) -> str:
    if seconds < 90:
        return f"{seconds:.0f} s"
    return f"{seconds / 60.0:.0f} min" if seconds < 5400 else f"{seconds / 3600.0:.1f} h"


def _time(value: Any) -> str:
    """A time of ISO 8601 as people read it, with its distance from UTC."""
    text = str(value)
    if not value or len(text) < 20:
        return "not yet" if not value else text
    return f"{text[:10]} {text[11:19]} (UTC{text[19:]})"


def local_time(value: Any) -> str:
    """A time of ISO 8601 in this machine's zone, as people read it; empty where there is none."""
    try:
        return _time(datetime.fromisoformat(str(value)).astimezone().isoformat(timespec="seconds"))
    except ValueError:
        return ""


def _text(value: Any) -> str:
    return escape("" if value is None else str(value))
