"""Text as it is searched: without differences of case, and with the look-alikes of Unicode (two micro signs, ligatures) as one."""

from __future__ import annotations

import sqlite3
import unicodedata

from dwellbench.errors import UsageError


def folded(*texts: str | None) -> str:
    """Return what a search looks through, one line a text."""
    return "\n".join(unicodedata.normalize("NFKC", text or "").casefold() for text in texts)


def storable(what: str, text: str | None) -> str | None:
    """Refuse text that no file can keep as text: bytes of a command line that were none, and the end-of-text sign."""
    if text is None:
        return None
    try:
        text.encode()
    except UnicodeEncodeError:
        raise UsageError(f"The {what} holds bytes that are no text.", remedy="Write it in UTF-8.") from None
    if "\0" in text:
        raise UsageError(f"The {what} holds a NUL character.", remedy="Leave it out.")
    return text


def fill_search(connection: sqlite3.Connection) -> None:
    """Give rows from before there was a search column theirs."""
    for row in connection.execute("SELECT id, label, marking FROM run").fetchall():
        search = folded(row["label"], row["marking"])
        connection.execute("UPDATE run SET search = ? WHERE id = ?", (search, row["id"]))
    for row in connection.execute("SELECT id, document FROM note").fetchall():
        connection.execute("UPDATE note SET search = ? WHERE id = ?", (folded(row["document"]), row["id"]))
