"""Reads the Settings sheet: which job, and the value of every setting or its default."""

import re
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field

from ledgersolve.contract import mended, settings, values
from ledgersolve.contract.columns import Entry, Holds, Value, quoted, shown
from ledgersolve.contract.faults import Fault, Faults, Place
from ledgersolve.contract.models import outside
from ledgersolve.contract.reading import Job
from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.currencies import MINOR_UNITS
from ledgersolve.workbook.tables import TitleRow
from ledgersolve.workbook.text import nearest, plain, unit_in

_OTHER_UNITS = frozenset((
    "min", "mins", "minute", "minutes", "m", "h", "hr", "hrs", "hour", "hours", "ms", "day", "days",
    "fraction", "share", "ratio", "0-1", "0..1", "permille", "‰", "bp",
))
_SIGNS = {"€": "EUR", "$": "USD", "£": "GBP", "¥": "JPY", "euro": "EUR", "euros": "EUR", "dollar": "USD",
          "us$": "USD", "pound": "GBP", "chf.": "CHF", "sfr": "CHF"}


@dataclass
class SettingValues:
    """Values of the settings by name: given ones, else defaults.

    ``given`` holds the cell of each filled value, ``rows`` the row of each setting named, ``bad`` names at
    fault and ``typed`` what stands there, ``as_text`` names whose number stands as text.
    """

    sheet: str = settings.SHEET
    values: dict[str, Value] = field(default_factory=dict)
    given: dict[str, Place] = field(default_factory=dict)
    rows: dict[str, int] = field(default_factory=dict)
    bad: set[str] = field(default_factory=set)
    typed: dict[str, str] = field(default_factory=dict)
    as_text: set[str] = field(default_factory=set)
    columns: dict[str, int] = field(default_factory=dict)
    readable: bool = True

    def number(self, name: str) -> float | None:
        """A number setting; None where it has none."""
        value = self.values.get(name)
        return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else None

    def whole(self, name: str) -> int | None:
        """A whole-number setting; None where it has none."""
        value = self.number(name)
        return None if value is None else int(value)

    def text(self, name: str) -> str:
        """A text setting; "" where it has none."""
        value = self.values.get(name)
        return value if isinstance(value, str) else ""

    def flag(self, name: str) -> bool:
        """A yes/no setting."""
        return self.values.get(name) is True

    def place(self, name: str) -> Place | None:
        """Value cell of a setting, filled or not; None where the sheet does not name the setting."""
        if name in self.given:
            return self.given[name]
        if name in self.rows and "Value" in self.columns:
            return self.rows[name], self.columns["Value"]
        return None

    def shown(self, entries: Sequence[Entry]) -> tuple[tuple[str, str], ...]:
        """Every setting with the value used, as text; where a value could not be read, what stands there."""
        return tuple((entry.title, self._shown(entry.title)) for entry in entries)

    def _shown(self, name: str) -> str:
        if name in self.typed:
            return f"{self.typed[name]}, which could not be read"
        return "not given" if name in self.bad else shown(self.values.get(name))


def find_settings(rows: Sequence[Mapping[str, Cell]], entries: Sequence[Entry],
                  ) -> tuple[dict[str, Mapping[str, Cell]], list[tuple[str, Cell]], list[Cell]]:
    """Rows by setting name, repeated settings, and name cells that are no setting."""
    by_plain = {plain(entry.title): entry.title for entry in entries}
    found: dict[str, Mapping[str, Cell]] = {}
    twice: list[tuple[str, Cell]] = []
    strangers: list[Cell] = []
    for row in rows:
        cell = row.get("Setting")
        if cell is None:
            continue
        name = by_plain.get(plain(str(cell.value)))
        if name is None:
            strangers.append(cell)
        elif name in found:
            twice.append((name, cell))
        else:
            found[name] = row
    return found, twice, strangers


def job_of(rows: Sequence[Mapping[str, Cell]]) -> Job | None:
    """The job the Settings sheet names; None where it is missing or no job."""
    row = find_settings(rows, (settings.JOB,))[0].get(settings.JOB.title)
    cell = row.get("Value") if row else None
    word = values.choice(str(cell.value), settings.JOB) if cell and cell.kind is Kind.TEXT else None
    return Job(word) if isinstance(word, str) else None


def read_settings(sheet: str, titles: TitleRow, rows: Sequence[Mapping[str, Cell]], entries: Sequence[Entry],
                  other_job: Sequence[Entry], faults: Faults, date1904: bool,
                  percents: Collection[Place] = ()) -> SettingValues:
    """Read every setting of a job and report what is wrong.

    ``other_job`` are the settings of the other job, which are told apart from slips; ``percents`` the cells
    shown as percentages, where 20 % is stored as 0.2.
    """
    result = SettingValues(sheet, {entry.title: entry.default for entry in entries}, columns=titles.columns)
    found, twice, strangers = find_settings(rows, entries)
    for name, cell in twice:
        faults.add(sheet, (cell.row, cell.column), name, Fault(
            "setting twice", f"the setting {quoted(cell.value)} a second time", f"one row for {name}",
            "Take one of the two rows out.", test=mended.unique(mended.down(cell.column, titles.row + 1, cell.row))))
    for entry in entries:
        if entry.title in found:
            _take(entry, found[entry.title], result, faults, date1904)
            if entry.unit.startswith("%") and result.given.get(entry.title) in percents:
                _take_percentage(entry, result, faults)
    near = _report_strangers(sheet, strangers, entries, found, other_job, faults)
    for entry in entries:
        if entry.required and entry.title not in result.given and entry.title not in result.bad:
            result.bad.add(entry.title)
            _report_missing(entry, result, titles, near.get(entry.title), faults)
    return result


def _take(entry: Entry, row: Mapping[str, Cell], result: SettingValues, faults: Faults,
          date1904: bool) -> None:
    name, cell = row["Setting"], row.get("Value")
    result.rows[entry.title] = name.row
    unit = unit_in(str(name.value))
    if unit_in(entry.title) and unit.casefold() in _OTHER_UNITS:
        result.bad.add(entry.title)
        result.typed[entry.title] = "nothing" if cell is None else values.found_in(cell)
        faults.add(result.sheet, (name.row, name.column), entry.title, Fault(
            "unit differs", f"the unit {quoted(unit)}", f"the unit {unit_in(entry.title)}",
            f"Give the value in {unit_in(entry.title)} and name the setting {entry.title}.",
            test=mended.title(entry.title)))
        return
    if cell is None:
        return
    value = _value(cell, entry, date1904)
    if isinstance(value, Fault):
        result.bad.add(entry.title)
        result.typed[entry.title] = values.found_in(cell)
        faults.add(result.sheet, (cell.row, cell.column), entry.title, value)
    elif value != "":
        result.values[entry.title] = value
        result.given[entry.title] = (cell.row, cell.column)
        if entry.numeric and cell.kind is not Kind.NUMBER:
            result.as_text.add(entry.title)


def _take_percentage(entry: Entry, result: SettingValues, faults: Faults) -> None:
    """Read a cell with a percent format by what it shows, and say so; formulas cannot use it as it stands."""
    stored = result.number(entry.title) or 0.0
    shown_value = float(f"{stored * 100:.15g}")
    fault = values.limit_fault(entry, shown_value) if outside(entry, [shown_value]) else None
    place = result.given[entry.title]
    if fault is not None:
        result.bad.add(entry.title)
        result.typed[entry.title] = f"{shown(shown_value)} %"
        faults.add(result.sheet, place, entry.title, fault)
        return
    result.values[entry.title] = shown_value
    result.as_text.add(entry.title)
    if stored:
        faults.notice(result.sheet, place, entry.title, "percent format",
                      f"a cell with a percent format, stored as {shown(stored)}",
                      f"{shown(shown_value)} in a plain cell",
                      f"It was read as it is shown: {shown(shown_value)} %.")


def _value(cell: Cell, entry: Entry, date1904: bool) -> Value | Fault:
    if entry.numeric:
        number = values.number(cell, entry)
        if isinstance(number, Fault):
            return number
        return (values.limit_fault(entry, number) if outside(entry, [number]) else None) or number
    words = values.text(cell, entry, date1904)
    if isinstance(words, Fault) or not words:
        return words
    if entry.holds is Holds.CHOICE:
        return values.choice(words, entry)
    if entry.holds is Holds.YES_NO:
        return values.yes_no(words, entry)
    return _currency(words, entry) if entry.holds is Holds.CURRENCY else words


def _currency(words: str, entry: Entry) -> str | Fault:
    code = words.upper()
    if code in MINOR_UNITS:
        return code
    meant = _SIGNS.get(words.casefold()) or (re.sub(r"[^A-Z]", "", code) or None)
    known = meant if meant in MINOR_UNITS else nearest(code, MINOR_UNITS)
    remedy = f"Did you mean {known}?" if known else "Look the code up; euro is EUR, US dollar is USD."
    return mended.watched(Fault("currency expected", f"{quoted(words)}", entry.expected(), remedy), entry)


def _report_strangers(sheet: str, strangers: Sequence[Cell], entries: Sequence[Entry],
                      found: Mapping[str, object], other_job: Sequence[Entry],
                      faults: Faults) -> dict[str, Cell]:
    """Notices for names close to a setting; gives the near misses of required settings by name."""
    absent = [entry.title for entry in entries if entry.title not in found]
    required = {entry.title for entry in entries if entry.required}
    others = {plain(entry.title): entry.title for entry in other_job}
    near: dict[str, Cell] = {}
    for cell in strangers:
        where = (cell.row, cell.column)
        if plain(str(cell.value)) in others:
            name = others[plain(str(cell.value))]
            faults.notice(sheet, where, name, "setting of the other job", f"the setting {quoted(cell.value)}",
                          "settings of this job", "It was not used; take it out, or check Job.")
            continue
        name = nearest(str(cell.value), absent, plain) or ""
        if name in required:
            near[name] = cell
        elif name:
            faults.notice(sheet, where, name, "setting like a known one",
                          f"the setting {quoted(cell.value)}; it was not used",
                          f"{quoted(name)}, if that is what it means",
                          "Change the name if the setting should be used.")
    return near


def _report_missing(entry: Entry, result: SettingValues, titles: TitleRow, slip: Cell | None,
                    faults: Faults) -> None:
    if slip is not None:
        faults.add(result.sheet, (slip.row, slip.column), entry.title, Fault(
            "missing setting", f"the setting {quoted(slip.value)}", f"a setting {entry.title}",
            f"Did you mean {entry.title}? Change the name.", test=mended.title(entry.title)))
        return
    place = result.place(entry.title)
    if place is not None:
        faults.add(result.sheet, place, entry.title, mended.watched(Fault(
            "required cell empty", "an empty cell", entry.expected(), "Fill the cell."), entry))
    else:
        faults.add(result.sheet, (titles.row, min(titles.headings)), entry.title, Fault(
            "missing setting", f"no row for {entry.title}", f"{entry.title}: {entry.expected()}",
            f"Add a row with {entry.title} in the column Setting."))
