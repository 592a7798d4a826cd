"""Times as files and people read them: RFC 3339 in UTC for files, the log's own zone for people."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta, tzinfo
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

_SECOND = 1_000_000_000
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def utc(ns: int) -> str:
    """Write a time [ns since 1970 UTC] as RFC 3339 UTC, with no more decimals than it needs."""
    whole, rest = divmod(int(ns), _SECOND)
    text = (_EPOCH + timedelta(seconds=whole)).strftime("%Y-%m-%dT%H:%M:%S")
    decimals = f".{rest:09d}".rstrip("0") if rest else ""
    return f"{text}{decimals}Z"


@dataclass(frozen=True, slots=True)
class LocalClock:
    """The clock on the wall where the log was made.

    Attributes
    ----------
    name : str
        Name of the zone, as a reader should see it.
    zone : tzinfo
    seconds : bool
        True when seconds are written.
    """

    name: str
    zone: tzinfo
    seconds: bool

    def moment(self, ns: int) -> str:
        """Write a time [ns since 1970 UTC]; in the repeated hour of autumn with its distance from UTC."""
        local = (_EPOCH + timedelta(microseconds=int(ns) // 1000)).astimezone(self.zone)
        text = local.strftime("%Y-%m-%d %H:%M:%S" if self.seconds else "%Y-%m-%d %H:%M")
        twice = local.replace(fold=0).utcoffset() != local.replace(fold=1).utcoffset()
        return f"{text} ({local.isoformat()[-6:]})" if twice else text


def local_clock(zone: str, period: float) -> LocalClock:
    """Return the log's own clock, or UTC when this machine does not know the zone.

    Parameters
    ----------
    zone : str
        IANA name.
    period : float
        Base period of the loop [s]; below one minute, seconds are written.
    """
    seconds = period < 60.0
    try:
        return LocalClock(zone, ZoneInfo(zone), seconds)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        return LocalClock("UTC", UTC, seconds)
