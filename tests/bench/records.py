"""What the store costs: writing a run, bytes a record and a trace, finding as it grows.

python -m tests.bench.records [RECORDS]
"""

from __future__ import annotations

import sys
import time
from pathlib import Path
from tempfile import TemporaryDirectory

from tests.records.test_store import ROWS, begin

from dwellbench.records import Store


def timed(store: Store, **where: str) -> float:
    """Milliseconds of listing a page."""
    begin_s = time.perf_counter()
    store.records(50, 0, **where)
    return (time.perf_counter() - begin_s) * 1e3


def main(most: int) -> None:
    """Print at growing sizes."""
    rows = [[n, n * 100, *row[2:]] for n, row in enumerate(ROWS * 15)]
    with TemporaryDirectory() as folder:
        path = Path(folder) / "r.db"
        with Store(path) as store:
            begin_s = time.perf_counter()
            for number in range(20):
                writer = begin(store, label=f"L{number}")
                for at in range(0, len(rows), 10):
                    writer.rows(rows[at : at + 10])
                writer.end("complete", None, {"verdict": "fit", "reason": "because"})
            cost_ms = (time.perf_counter() - begin_s) * 50
            print(
                f"a run of {len(rows)} rows costs {cost_ms:.1f} ms to write, {path.stat().st_size / 20 / 1024:.1f} kB"
            )
            count = 20
            size = most // 100
            while count < most:
                for _ in range(size - count if size > count else 0):
                    begin(store, label=f"L{count}").end(
                        "complete", None, {"verdict": "unfit", "reason": "because"}
                    )
                    count += 1
                page, found = timed(store), timed(store, text="L7")
                print(
                    f"{count:8} records: a page {page:6.2f} ms, a search {found:6.2f} ms, {path.stat().st_size / count:6.0f} bytes each"
                )
                size *= 10


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 2000)
