"""A first loop file for an unknown log: every guess with its reason and how sure it is."""

from auditor.draft.guess import Guess
from auditor.draft.write import Draft, draft

__all__ = ["Draft", "Guess", "draft"]
