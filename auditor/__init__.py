"""Log replay auditor: what event-based updates would have done on a periodic loop's own log.

Public names are loaded when they are first used, so that the command line's help stays light.
"""

from __future__ import annotations

import sys
from importlib import import_module
from types import ModuleType
from typing import TYPE_CHECKING, Any

from auditor.version import VERSION

__version__ = VERSION

_HOME = {
    "read_loop": "auditor.loopfile",
    "read_record": "auditor.logs.align",
    "identify": "auditor.identify.identify",
    "replay": "auditor.job",
    "audit": "auditor.audit",
    "write_audit": "auditor.report.write",
    "Loop": "auditor.loop",
    "Record": "auditor.logs.record",
    "Model": "auditor.identify.plant",
    "Replay": "auditor.replay",
    "Audit": "auditor.audit",
    "AuditorError": "auditor.errors",
}

if TYPE_CHECKING:
    from auditor.audit import Audit as Audit
    from auditor.errors import AuditorError as AuditorError
    from auditor.identify.plant import Model as Model
    from auditor.logs.align import read_record as read_record
    from auditor.logs.record import Record as Record
    from auditor.loop import Loop as Loop
    from auditor.loopfile import read_loop as read_loop
    from auditor.replay import Replay as Replay
    from auditor.report.write import write_audit as write_audit

__all__ = ["__version__", *sorted(_HOME)]


class _Public(ModuleType):
    """The package, with functions where three rooms have the same name.

    Importing a room sets it as an attribute of the package; a data descriptor keeps `au.identify`, `au.replay` and
    `au.audit` the functions all the same. The rooms stay reachable through import statements.
    """

    def __getattr__(self, name: str) -> Any:
        if name in _HOME:
            return getattr(import_module(_HOME[name]), name)
        raise AttributeError(f"module 'auditor' has no attribute '{name}'")


def _function(name: str) -> property:
    def get(package: ModuleType) -> Any:
        return getattr(import_module(_HOME[name]), name)

    def put(package: ModuleType, room: object) -> None:
        """Let the import system set the room without effect."""

    return property(get, put)


for _name in ("identify", "replay", "audit"):
    setattr(_Public, _name, _function(_name))

sys.modules[__name__].__class__ = _Public
