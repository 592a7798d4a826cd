"""A copy of a loop's log and loop file that may be shared: neutral names, shifted time, another scale, same counts."""

from auditor.disguise.key import Key, key_text, read_key
from auditor.disguise.make import Disguised, disguise
from auditor.disguise.write import write_disguised

__all__ = ["Disguised", "Key", "disguise", "key_text", "read_key", "write_disguised"]
