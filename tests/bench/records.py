"""What the store costs: writing a run, bytes a record and a row, finding as it grows.

One real run on the emulated box is the contents; it is written again and again under other labels.

python -m tests.bench.records [RECORDS]
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np

from dwellbench.bench import open_box
from dwellbench.records import Store


def real_run(folder: Path) -> tuple[dict[str, Any], list[list[int]]]:
    """A record and its sample rows, as the box and the judge made them."""
    with Store(folder / "one.db") as store, open_box("emu://film?seed=7") as box:
        name = str(box.test("47n 630V film", "coupling", store).record)
        return store.record(name), store.samples(name).tolist()


def write(store: Store, record: dict[str, Any], rows: list[list[int]], number: int) -> None:
    """The same run once more: rows one by one, as they arrive; events among them."""
    writer = store.begin_run(
        run_key=f"k{number}",
        label=f"drawer {number % 37}/C{number}",
        note=f"from set {number % 11}",
        box={"box": "0" * 16, "model": "reference", "firmware": record["firmware"], "build": record["build"]},
        simulated=True,
        **{name: record[name] for name in ("part", "role", "grade", "plan", "calibration")},
    )
    events = {len(rows) * n // len(record["events"]): event for n, event in enumerate(record["events"])}
    for at, row in enumerate(rows):
        if at in events:
            writer.event(events[at]["kind"], {k: v for k, v in events[at].items() if k != "kind"})
        writer.rows([row])
    outcome = {key: value for key, value in record["outcomes"][0].items() if key != "made_utc"}
    writer.end(record["end"], record["fault"], outcome)


def milliseconds(ask: Callable[[], object], times: int = 7) -> float:
    """The middle one of some tries."""
    taken = []
    for _ in range(times):
        begin_s = time.perf_counter()
        ask()
        taken.append((time.perf_counter() - begin_s) * 1e3)
    return median(taken)


def finding(store: Store, newest: int) -> dict[str, float]:
    """What finding costs now."""
    return {
        "a page": milliseconds(lambda: store.records(50)),
        "the last page": milliseconds(lambda: store.records(50, newest - 50)),
        "a page of a search": milliseconds(lambda: store.records(50, text="SET 7")),
        "a search that finds one": milliseconds(lambda: store.records(50, text=f"/c{newest // 2}")),
        "a search that finds none": milliseconds(lambda: store.records(50, text="nowhere")),
        "the last test of a label": milliseconds(lambda: store.last_test(label="drawer 1/C1")),
        "counting a verdict": milliseconds(lambda: store.count(verdict="fit")),
        "one record": milliseconds(lambda: store.record(newest // 2)),
        "its samples": milliseconds(lambda: store.samples(newest // 2)),
    }


def packed(store: Store) -> float:
    """Bytes of samples a record, as they lie in the file."""
    return float(store._connection.execute("SELECT avg(length(samples)) FROM trace").fetchone()[0])


def main(most: int) -> None:
    """Print at a tenth of the size and at the whole."""
    with TemporaryDirectory() as name:
        folder = Path(name)
        record, rows = real_run(folder)
        text = len("\n".join(",".join(map(str, row)) for row in rows))
        before: dict[str, float] = {}
        with Store(folder / "r.db") as store:
            count, costs = 0, []
            for size in (most // 10, most):
                while count < size:
                    begin_s = time.perf_counter()
                    write(store, record, rows, count)
                    costs.append((time.perf_counter() - begin_s) * 1e3)
                    count += 1
                now = finding(store, count)
                print(f"{count} records")
                for what, cost_ms in now.items():
                    ratio = f", {cost_ms / before[what]:5.1f} times that of a tenth" if before else ""
                    print(f"  {what:26} {cost_ms:8.2f} ms{ratio}")
                before = now
            store._connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
            run_s = (rows[-1][1] - rows[0][1]) / 1e3
            print(f"writing a run of {len(rows)} rows, {run_s:.0f} s at the box: {np.median(costs):.1f} ms")
            print(
                f"  the last tenth against the first: {np.median(costs[-most // 10 :]) / np.median(costs[: most // 10]):.2f}"
            )
            print(
                f"samples {packed(store):.0f} bytes a run, {packed(store) / len(rows):.1f} a row ({text / len(rows):.1f} as text)"
            )
            print(f"the file {(folder / 'r.db').stat().st_size / count:.0f} bytes a record in all")
            begin_s = time.perf_counter()
            wrong = len(store.check())
            print(
                f"checking all: {(time.perf_counter() - begin_s) * 1e3 / count:.2f} ms a record, {wrong} found damaged"
            )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1000)
