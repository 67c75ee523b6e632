"""The store: one SQLite file that keeps what was measured, as it arrives, and what came of it.

The way of a run, and the files in that order:

schema.py       tables and migrations, each recorded in the transaction that makes it
migrate.py      an older file made newer, after a copy (copying.py)
database.py     opening: is it ours, which version, may we write; failures.py puts every failure in plain words
owner.py        who drives which box: a lock that a killed process lets go of
beginning.py    the box, its calibration and the run's row
writer.py       rows and events as they arrive
closing.py      samples in one piece (packing.py), the end and the outcome in one transaction (transaction.py)
adding.py       later outcomes and notes
query.py        finding; show.py: one record
digest.py       what damage shows by; check.py looks for it
store.py        all of it together
"""

from dwellbench.records.check import Damage
from dwellbench.records.query import Summary, Where
from dwellbench.records.store import Store
from dwellbench.records.writer import RunWriter

__all__ = ["Damage", "RunWriter", "Store", "Summary", "Where"]
