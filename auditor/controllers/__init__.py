"""What the loop does with a sample: the controllers a replay can run."""

from auditor.controllers.pid import Pid

__all__ = ["Pid"]
