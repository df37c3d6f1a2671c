"""What the answer to each bad file costs: seconds and peak memory of the child process that gives it.

Run with ``python -m tests.bench.bench_bad_files``. Every workbook of ``tests/faults/corpus.py`` and every input
of ``tests/faults/service_inputs.py`` is answered by the service's own child process, one after the other,
start-up included. Prints a table and the worst figures beside the bars: 10 s and 500 MB.
"""

import json
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

SECONDS_BAR, MEGABYTES_BAR = 10.0, 500.0
_ROOT = Path(__file__).parent.parent.parent


def write_all(folder: Path) -> None:
    """Write every bad file and the list of them."""
    # only here: what the measuring process itself holds in memory counts for its children, too
    from tests.books import write_book
    from tests.faults.corpus import FAULTS
    from tests.faults.service_inputs import HEAVY, INPUTS

    listed = []
    for number, fault in enumerate(FAULTS):
        sheets = fault.base()
        fault.change(sheets)
        path = write_book(folder / f"fault {number}.xlsx", sheets)
        listed.append(("corpus", fault.name, str(path), ["to fix"]))
    for number, (name, made) in enumerate((INPUTS | HEAVY).items()):
        path = folder / f"input {number}{made.suffix}"
        made.write(path)
        listed.append(("input", name, str(path), list(made.outcomes)))
    (folder / "list.json").write_text(json.dumps(listed), "utf-8")


def answer(path: Path, private: Path) -> dict[str, object]:
    """Answer one file in a child of its own; its outcome, wall and CPU seconds, and peak megabytes."""
    result = private / "result.json"
    request = {
        "handler": "ledgersolve.job:handle", "source": str(path), "into": str(private), "result": str(result),
        "shown_name": path.name, "memory_bytes": 4 << 30, "file_bytes": 1 << 30, "cpu_seconds": 600, "nice": 0,
    }
    (private / "request.json").write_text(json.dumps(request), "utf-8")
    command = [sys.executable, "-P", "-m", "ledgersolve.service.child", str(private / "request.json")]
    environment = {**os.environ, "PYTHONPATH": str(_ROOT)}
    with (private / "words").open("wb") as words:
        began = time.monotonic()
        child = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=words, stderr=words, env=environment)
        _, status, used = os.wait4(child.pid, 0)
        seconds = time.monotonic() - began
        child.returncode = os.waitstatus_to_exitcode(status)
    if child.stdin is not None:
        child.stdin.close()
    told = json.loads(result.read_text("utf-8")) if result.exists() else {}
    return {
        "outcome": told.get("outcome", f"no answer, code {child.returncode}"), "seconds": seconds,
        "cpu": used.ru_utime + used.ru_stime, "megabytes": used.ru_maxrss / 1024,
        "traceback": b"Traceback" in (private / "words").read_bytes(),
    }


def main() -> None:
    """Write, answer, print."""
    if sys.argv[1:2] == ["write"]:
        write_all(Path(sys.argv[2]))
        return
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        subprocess.run([sys.executable, "-m", "tests.bench.bench_bad_files", "write", name], check=True, cwd=_ROOT)
        rows = []
        print("| from | file | outcome | wall s | CPU s | peak MB |\n|---|---|---|---|---|---|")
        for group, title, path, wanted in json.loads((folder / "list.json").read_text("utf-8")):
            with tempfile.TemporaryDirectory(dir=folder) as private:
                row = answer(Path(path), Path(private))
            row["right"] = row["outcome"] in wanted and not row["traceback"]
            rows.append(row)
            shown = f"{row['outcome']}{'' if row['right'] else ' (WRONG)'}"
            print(f"| {group} | {title} | {shown} | {row['seconds']:.2f} | {row['cpu']:.2f} "
                  f"| {row['megabytes']:.0f} |", flush=True)
    print(f"\n{len(rows)} files, {sum(not row['right'] for row in rows)} answered wrongly; at most "
          f"{max(row['seconds'] for row in rows):.2f} s wall (bar {SECONDS_BAR:g}), "
          f"{max(row['cpu'] for row in rows):.2f} s CPU, {max(row['megabytes'] for row in rows):.0f} MB "
          f"(bar {MEGABYTES_BAR:g})")


if __name__ == "__main__":
    main()
