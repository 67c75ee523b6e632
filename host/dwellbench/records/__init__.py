"""The store: one SQLite file that keeps what was measured, as it arrives, and what came of it.

schema.py     tables and migrations, each recorded in the transaction that makes it
database.py   opening: is it ours, which version, may we write; every SQLite error in plain words
owner.py      who drives which box: a lock that a killed process lets go of
packing.py    sample rows in few bytes, with a hash over them
writer.py     one run being written
query.py      finding and showing
store.py      all of it together
"""

from dwellbench.records.query import Summary
from dwellbench.records.store import Store
from dwellbench.records.writer import RunWriter

__all__ = ["RunWriter", "Store", "Summary"]
