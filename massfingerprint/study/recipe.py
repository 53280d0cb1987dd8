"""The study file: what it may say, checked key by key, every problem with its line and its cure."""

import datetime
import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from massfingerprint.arguments import real_number, whole_number
from massfingerprint.earth.choice import ChosenEarth
from massfingerprint.earth.frames import FRAMES
from massfingerprint.earth.models import MODELS as EARTHS
from massfingerprint.errors import InputError, MassFingerprintError, StudyError, nearest_names
from massfingerprint.files.toml import TomlFile, read_toml
from massfingerprint.mass.covariance import COMPONENTS
from massfingerprint.mass.intervals import INTERVALS
from massfingerprint.mass.ledger import QUANTITIES
from massfingerprint.mass.rates import check_windows
from massfingerprint.sealevel.fingerprints import FIELDS
from massfingerprint.sphere.grids import regular_grid

FIGURE_FORMATS = ("png", "pdf", "svg")
DEFAULT_FOLDER = "out"


@dataclass(frozen=True, kw_only=True)
class MassChoice:
    """The mass record: as for ``read_ledger``; ``drop`` names sources left out, ``correlation`` a table between sources."""

    file: Path
    quantity: str = "cumulative"
    error_model: str | None = None
    units: str | None = None
    reference_epoch: str | None = None
    correlation: Path | None = None
    drop: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class RegionChoice:
    """Outlines of the mass sources: built-in names and files of the user's own; neither: the record's names are built in."""

    builtin: tuple[str, ...] = ()
    outlines: tuple[Path, ...] = ()
    name_field: str = "name"


@dataclass(frozen=True, kw_only=True)
class EarthChoice:
    """The Earth, built in or from a file, whether its rotation takes part, and how heavy the water is that moves."""

    model: str = "prem"
    file: Path | None = None
    period: float | None = None
    love_frame: str | None = None
    rotation: bool = True
    redistributed_density: float | None = None

    @property
    def chosen(self) -> ChosenEarth:
        """What gives its Love numbers."""
        return ChosenEarth(self.model if self.file is None else str(self.file), self.period, self.love_frame)


@dataclass(frozen=True, kw_only=True)
class GridChoice:
    """Spacing of the fields in degrees, and the spherical-harmonic degree of the solution."""

    spacing: float = 0.25
    max_degree: int = 512


@dataclass(frozen=True, kw_only=True)
class SiteChoice:
    """Table of coasts: site, lat, lon."""

    file: Path


@dataclass(frozen=True, kw_only=True)
class RateChoice:
    """How rates are fitted."""

    seasonal: bool = False


@dataclass(frozen=True, kw_only=True)
class OutputChoice:
    """What is left in the folder: figures, fields on the grid, interval behind every +-, frame of geocentric fields.

    ``since`` is the time at which every series starts from 0; by default each source starts where its record does.
    """

    folder: Path = Path(DEFAULT_FOLDER)
    maps: bool = True
    fields: tuple[str, ...] = ("relative_sea_level",)
    interval: str = "90 %"
    figure_formats: tuple[str, ...] = ("png", "pdf")
    reference_frame: str = "CM"
    since: str | None = None


@dataclass(frozen=True, kw_only=True)
class CreditChoice:
    """Who answers for the study; goes into the files as Attribute Convention for Data Discovery (ACDD) wants it."""

    creator_name: str = "not given"
    creator_email: str = "not given"
    creator_url: str = "not given"
    institution: str = "not given"
    project: str = "not given"
    license: str = "not given"
    acknowledgement: str = "not given"


@dataclass(frozen=True, kw_only=True)
class Recipe:
    """Everything a study is asked to do; paths are absolute or relative to the current folder.

    ``windows`` maps a name to (start, end) as ISO dates; empty: the whole record. ``source_file`` and ``raw`` are the file it was
    read from and its bytes, if any.
    """

    title: str
    mass: MassChoice
    sites: SiteChoice
    regions: RegionChoice = field(default_factory=RegionChoice)
    earth: EarthChoice = field(default_factory=EarthChoice)
    grid: GridChoice = field(default_factory=GridChoice)
    windows: Mapping[str, tuple[str, str]] = field(default_factory=dict)
    rates: RateChoice = field(default_factory=RateChoice)
    output: OutputChoice = field(default_factory=OutputChoice)
    credits: CreditChoice = field(default_factory=CreditChoice)
    source_file: Path | None = None
    raw: bytes = field(default=b"", repr=False)


Check = Callable[[Any, Path], Any]


def _text(value: Any, base: Path) -> str:
    del base
    if not isinstance(value, str) or not value.strip():
        raise InputError(f'must be text in quotes, got {value!r}. Write it as "...".')
    return value.strip()


def _path(value: Any, base: Path) -> Path:
    return base / _text(value, base)


def _file(value: Any, base: Path) -> Path:
    path = _path(value, base)
    if not path.is_file():
        raise InputError(f"there is no file {path}. Paths are relative to the study file; check the name.")
    return path


def _switch(value: Any, base: Path) -> bool:
    del base
    if not isinstance(value, bool):
        raise InputError(f"must be true or false, got {value!r}.")
    return value


def _number(name: str, unit: str) -> Check:
    def check(value: Any, base: Path) -> float:
        del base
        smallest = 1e-300  # above 0
        return real_number(value, argument=name, allowed=f"a positive number of {unit}", low=smallest)

    return check


def _word(known: tuple[str, ...], kind: str) -> Check:
    def check(value: Any, base: Path) -> str:
        del base
        if not isinstance(value, str) or value not in known:
            raise InputError(f"no {kind} {value!r}. {nearest_names(str(value), known)}")
        return value

    return check


def _list_of(each: Check, *, least: int = 0) -> Check:
    def check(value: Any, base: Path) -> tuple[Any, ...]:
        if not isinstance(value, list):
            raise InputError(f"must be a list in square brackets, got {value!r}.")
        out = tuple(each(one, base) for one in value)
        if len(set(out)) < len(out):
            raise InputError(f"names one entry more than once: {value!r}. Name each once.")
        if len(out) < least:
            raise InputError("is an empty list. Name at least one.")
        return out

    return check


def _spacing(value: Any, base: Path) -> float:
    del base
    number = real_number(value, argument="spacing", allowed="a number of degrees from 0.05 to 10", low=0.05, high=10.0)
    regular_grid(number)
    return number


def _degree(value: Any, base: Path) -> int:
    del base
    degree = whole_number(value, argument="max_degree", lowest=2)
    if degree > 4096:
        raise InputError(f"max_degree: must be 4096 or less, got {degree}.")
    return degree


def _date(value: Any, base: Path) -> str:
    if isinstance(value, datetime.datetime | datetime.date):
        return value.isoformat()[:10]
    text = _text(value, base)
    try:
        return datetime.date.fromisoformat(text).isoformat()
    except ValueError as error:
        raise InputError(f"must be a date such as 2003-01-01, got {text!r}.") from error


_CREDIT_KEYS: dict[str, Check] = dict.fromkeys(CreditChoice.__dataclass_fields__, _text)
_TABLES: dict[str, tuple[type, dict[str, Check]]] = {
    "mass": (
        MassChoice,
        {
            "file": _file,
            "quantity": _word(QUANTITIES, "quantity"),
            "error_model": _word(COMPONENTS, "error model"),
            "units": _text,
            "reference_epoch": _date,
            "correlation": _file,
            "drop": _list_of(_text),
        },
    ),
    "regions": (
        RegionChoice,
        {"builtin": _list_of(_text), "outlines": _list_of(_file), "name_field": _text},
    ),
    "earth": (
        EarthChoice,
        {
            "model": _word(tuple(EARTHS), "Earth"),
            "file": _file,
            "period": _number("period", "seconds"),
            "love_frame": _word(FRAMES, "reference frame"),
            "rotation": _switch,
            "redistributed_density": _number("redistributed_density", "kg m-3"),
        },
    ),
    "grid": (GridChoice, {"spacing": _spacing, "max_degree": _degree}),
    "sites": (SiteChoice, {"file": _file}),
    "rates": (RateChoice, {"seasonal": _switch}),
    "output": (
        OutputChoice,
        {
            "folder": _path,
            "maps": _switch,
            "fields": _list_of(_word(FIELDS, "field"), least=1),
            "interval": _word(INTERVALS, "interval"),
            "figure_formats": _list_of(_word(FIGURE_FORMATS, "format of figures"), least=1),
            "reference_frame": _word(FRAMES, "reference frame"),
            "since": _date,
        },
    ),
    "credits": (CreditChoice, _CREDIT_KEYS),
}
_NEEDED = {("mass", "file"), ("sites", "file")}


@dataclass
class Reading:
    """A study file while it is read: what is sound so far, and every problem found."""

    source: TomlFile
    problems: list[tuple[int, str]] = field(default_factory=list)

    def problem(self, words: str, *place: str | int) -> None:
        """Note one problem at the line of a key."""
        self.problems.append((self.source.line(*place), words))

    def attempt(self, place: tuple[str | int, ...], call: Callable[..., Any], *given: Any, **named: Any) -> Any:
        """Result of a call, or None with its complaint noted at the line of a key."""
        try:
            return call(*given, **named)
        except MassFingerprintError as error:
            self.problem(str(error), *place)
            return None

    def raise_if_any(self) -> None:
        """Raise StudyError with all problems, in the order of their lines."""
        if not self.problems:
            return
        name = self.source.path
        lines = tuple(f"{name}: line {line}: {words}" for line, words in sorted(self.problems, key=lambda p: p[0]))
        count = f"{len(lines)} problems" if len(lines) > 1 else "1 problem"
        raise StudyError("\n".join([f"{name}: {count}, nothing was run.", *lines]), lines)


def read_structure(path: str | os.PathLike[str]) -> tuple[Reading, dict[str, Any]]:
    """Keys and values of a study file, checked one by one; files named in it must exist, they are not opened.

    Returns
    -------
    (Reading, dict)
        The problems so far, and the sound tables as their dataclasses (``title`` and ``windows`` as they are); a table with
        a missing or unusable needed key is not there.
    """
    reading = Reading(read_toml(path))
    content, base = reading.source.content, reading.source.path.parent
    allowed = ("title", "windows", *_TABLES)
    for name in content:
        if name not in allowed:
            reading.problem(f"[{name}]: unknown table or key. {nearest_names(name, allowed)}", name)
    sound: dict[str, Any] = {"title": "", "windows": _windows(reading, content.get("windows", []))}
    if "title" not in content:
        reading.problem('title: is missing. Add title = "..." as the first line.')
    else:
        sound["title"] = reading.attempt(("title",), _named, "title", _text, content["title"], base)
    for name in _TABLES:
        table = _table(reading, name, content.get(name, {}), base)
        if table is not None:
            sound[name] = table
    return reading, sound


def _named(key: str, check: Check, value: Any, base: Path) -> Any:
    """Value after its check; the complaint starts with the key, once."""
    try:
        return check(value, base)
    except InputError as error:
        raise InputError(f"{key}: {str(error).removeprefix(f'{key.rsplit(maxsplit=1)[-1]}: ')}") from error


def _table(reading: Reading, name: str, given: Any, base: Path) -> Any:
    kind, keys = _TABLES[name]
    if not isinstance(given, dict):
        reading.problem(f"{name}: must be a table, written as [{name}] on a line of its own.", name)
        return None
    values: dict[str, Any] = {}
    for key, value in given.items():
        if key not in keys:
            reading.problem(f"[{name}] {key}: unknown key. {nearest_names(key, tuple(keys))}", name, key)
            continue
        outcome = reading.attempt((name, key), _named, f"[{name}] {key}", keys[key], value, base)
        if outcome is not None:
            values[key] = outcome
    lacking = [key for table, key in _NEEDED if table == name and key not in given]
    for key in lacking:
        reading.problem(f'[{name}] {key}: is missing. Add {key} = "..." under [{name}].', name)
    if name == "output" and "folder" not in values:
        values["folder"] = base / DEFAULT_FOLDER
    return None if any(table == name and key not in values for table, key in _NEEDED) else kind(**values)


def _windows(reading: Reading, given: Any) -> dict[str, tuple[str, str]]:
    if not isinstance(given, list) or not all(isinstance(one, dict) for one in given):
        reading.problem("windows: write each as [[windows]] with name, start and end.", "windows")
        return {}
    out: dict[str, tuple[str, str]] = {}
    for number, one in enumerate(given):
        window = reading.attempt(("windows", number), _window, one, out)
        if window is not None:
            out[window[0]] = window[1]
    return out


def _window(given: dict[str, Any], taken: Mapping[str, Any]) -> tuple[str, tuple[str, str]]:
    keys: dict[str, Check] = {"name": _text, "start": _date, "end": _date}
    for key in given:
        if key not in keys:
            raise InputError(f"[[windows]] {key}: unknown key. {nearest_names(key, tuple(keys))}")
    for key in keys:
        if key not in given:
            raise InputError(f"[[windows]] {key}: is missing. A window has name, start and end.")
    name, start, end = (_named(f"[[windows]] {key}", check, given[key], Path()) for key, check in keys.items())
    if name in taken:
        raise InputError(f"[[windows]] name: {name!r} stands there twice. Give each window its own.")
    check_windows({name: (start, end)})
    return name, (start, end)
