"""The loop file: TOML in, the frozen `Loop` out, every fault of the file in one error."""

from auditor.loopfile.read import controller_in_words, read_loop

__all__ = ["controller_in_words", "read_loop"]
