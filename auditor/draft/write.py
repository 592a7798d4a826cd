"""`draft`: from a log to the text of a loop file."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from auditor.draft.guess import Guess
from auditor.draft.guesses import hints, log_guesses, loop_guesses, mode_guesses, other_columns, signal_guesses
from auditor.draft.page import page
from auditor.draft.survey import survey


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Draft:
    """A drafted loop file.

    Attributes
    ----------
    text : str
        The loop file, TOML with comments.
    guesses : tuple of Guess
        Everything the file states, in its order.
    """

    text: str
    guesses: tuple[Guess, ...]

    @property
    def fill_in(self) -> tuple[str, ...]:
        """The keys that a person must fill in before the file can be used."""
        return tuple(guess.key for guess in self.guesses if guess.fill_in)

    def value(self, key: str) -> str | None:
        """Return what was guessed for a key, as the file writes it; None when nothing was."""
        return next((guess.value for guess in self.guesses if guess.key == key), None)


def draft(log: str | Path, *, folder: str | Path | None = None) -> Draft:
    """Look at an unknown log and draft a loop file for it.

    Parameters
    ----------
    log : str or Path
        A text table (plain or gzip), a Parquet file, a folder of either, or a glob.
    folder : str or Path, optional
        Where the loop file will be, so that the log's path is written from there; the log's own folder by default.

    Returns
    -------
    Draft
        Accepted by `auditor.loopfile.read_loop` as it is, unless lines are marked FILL IN.

    Raises
    ------
    LogError
        When there is no such log, or it is neither a text table nor Parquet.
    """
    path = Path(log)
    home = path.parent if folder is None else Path(folder)
    found = survey(path)
    guesses = (
        *loop_guesses(found, path),
        *log_guesses(found, path, home),
        *signal_guesses(found),
        *mode_guesses(found),
    )
    text = page(path.name, found.peek.whole, guesses, hints(found), other_columns(found))
    return Draft(text=text, guesses=guesses)
