"""Words a header may use, in English, German, Dutch, French and Spanish; only ever the second reason for a guess."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping, Sequence
from types import MappingProxyType


def _words(text: str) -> tuple[str, ...]:
    return tuple(text.split())


# Endings and abbreviations stand as whole words, stems (four letters and more) also at the start of a word.
WORDS: Mapping[str, Sequence[str]] = MappingProxyType(
    {
        "time": _words(
            "time timestamp stamp date datetime t ts clock zeit zeitstempel zeitpunkt datum uhrzeit tijd tijdstip "
            "tijdstempel heure horodatage temps hora fecha tiempo utc epoch"
        ),
        "setpoint": _words(
            "setpoint set sp target reference ref setp wsp sollwert soll fuhrungsgrosse vorgabe streefwaarde streef "
            "gewenst instelwaarde setwaarde richtwaarde sw consigne cons objectif consigna referencia deseado r"
        ),
        "measurement": _words(
            "measurement measured process actual pv istwert ist messwert meting gemeten mesure mesuree medida medicion "
            "valor y"
        ),
        "quantity": _words(
            "level flow pressure temperature temp oxygen head pegel fullstand wasserstand niveau durchfluss druck "
            "temperatur vorlauf sauerstoff peil waterstand debiet druk temperatuur zuurstof debit pression oxygene "
            "nivel caudal presion temperatura oxigeno"
        ),
        # What a device does speaks for the actuator; a device alone does unless a quantity stands beside it.
        "actuator": _words(
            "actuator output out op co mv cv position pos speed opening drive control manipulated stellgrosse "
            "stellwert stellung ausgang drehzahl reglerausgang uitgang uitsturing klepstand schuifstand toerental "
            "stuursignaal sortie commande ouverture vitesse salida velocidad apertura mando u"
        ),
        "device": _words(
            "valve gate pump damper blower ventil klappe schieber pumpe geblase klep schuif pomp regelklep vanne pompe "
            "clapet valvula compuerta bomba"
        ),
        "mode": _words(
            "mode auto automatic manual state status betriebsart modus hand automatik bedrijfsmodus regime "
            "marche etat modo estado automatico"
        ),
        "quality": _words("quality qual status qualitat gute kwaliteit qualite calidad"),
        "index": _words("index idx nr no id row record line satz zeile regel ligne fila unnamed"),
    }
)
AUTOMATIC = frozenset(
    _words(
        "auto automatic automatik automatisch automatique automatico aut a automat cascade cas kaskade regelung on ein"
    )
)
UNITS = frozenset(
    _words(
        "m mm cm km m3/s m³/s m3/h m³/h m3/d l/s l/min l/h % bar mbar pa kpa mpa hpa psi k c f °c °f degc degf rpm "
        "1/min u/min tr/min hz s min h a ma v mv kv w kw mw kwh mg/l g/l ppm mnap mm/s m/s nm3/h kg/s kg/h t/h ph ntu "
        "ms/cm µs/cm mwc mwk mca dbar -"
    )
)
_ENDINGS: Mapping[str, str] = MappingProxyType(
    {
        "m3s": "m3/s", "m3h": "m3/h", "m3ph": "m3/h", "ls": "l/s", "lps": "l/s", "lpm": "l/min", "lmin": "l/min",
        "pct": "%", "percent": "%", "prozent": "%", "procent": "%", "degc": "°C", "celsius": "°C", "bar": "bar",
        "mbar": "mbar", "kpa": "kPa", "mpa": "MPa", "pa": "Pa", "rpm": "rpm", "hz": "Hz", "mm": "mm", "cm": "cm",
        "m": "m", "mgl": "mg/l", "ma": "mA", "kw": "kW", "c": "°C",
    }
)  # fmt: skip
_BRACKETED = re.compile(r"[\[({<]\s*([^\])}>]{1,12}?)\s*[\])}>]\s*$")
_SLASHED = re.compile(r"\s+(?:/|in)\s+(\S{1,8})$")
_EDGE = re.compile(r"(?<=[a-zà-ÿ])(?=[A-Z])|(?<=[A-Z])(?=[A-Z][a-zà-ÿ])|[^A-Za-zÀ-ÿ0-9]+")


def tokens(name: str) -> list[str]:
    """Return the words of a header in lower case and without accents: ``LevelSP_pool7`` → level, sp, pool7."""
    return [plain(part) for part in _parts(name)]


def _parts(name: str) -> list[str]:
    return [part for part in _EDGE.split(name) if part]


def plain(word: str) -> str:
    """Return a word in lower case, without accents."""
    decomposed = unicodedata.normalize("NFKD", word.lower().replace("ß", "ss"))
    return "".join(sign for sign in decomposed if not unicodedata.combining(sign))


def names(header: str, role: str) -> str | None:
    """Return the word of `header` that speaks for `role` (a key of `WORDS`), None when there is none.

    A short word must stand alone; a stem of four letters or more may also begin or end a longer word, as German and
    Dutch put words together.
    """
    return next((part for part in reversed(_parts(header)) if _speaks_for(plain(part), WORDS[role])), None)


def _speaks_for(token: str, known: Sequence[str]) -> bool:
    bare = token.rstrip("0123456789") or token
    if token in known or bare in known:
        return True
    return any(len(word) >= 4 and (bare.startswith(word) or bare.endswith(word)) for word in known)


def unit_of(header: str) -> str:
    """Return the unit a header states, as in ``level [m]``, ``flow_m3h``, ``Druck in bar``; empty without one."""
    for pattern in (_BRACKETED, _SLASHED):
        match = pattern.search(header)
        if match and is_unit(match[1]):
            return match[1].strip()
    parts = re.split(r"[_\s.]+", header.strip())
    return _ENDINGS.get(plain(parts[-1]), "") if len(parts) > 1 else ""


def is_unit(text: str) -> bool:
    """Return True for text that is a unit of measurement, with or without brackets around it."""
    return text.strip().strip("[](){}<>").strip().lower() in UNITS
