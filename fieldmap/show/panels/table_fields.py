"""Fields for the keys of a ``[table]`` section."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

from fieldmap.readings.layout import QUANTITIES
from fieldmap.show.look import short
from fieldmap.show.panels.parts import column, hooked, row

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from fieldmap.readings.columns import Heading
    from fieldmap.readings.guess import TableGuess

__all__ = ["LayoutFields"]

NONE: Final = ""  # the choice of no column
RECORDED: Final = ("flux", "dflux", "voltage")
_DELIMITERS: Final = (
    ("comma  ,", ","),
    ("semicolon  ;", ";"),
    ("tab", "\t"),
    ("bar  |", "|"),
    ("blanks", " "),
)
_UNITS: Final = {
    "time": ("s", "ms", "us", "min"),
    "position": ("mm", "m", "um", "cm"),
    "flux": ("V s", "mV s", "uV s", "nV s"),
    "dflux": ("V s", "mV s", "uV s", "nV s"),
    "voltage": ("V", "mV", "uV"),
    "temperature": ("degC", "K"),
    "current": ("A", "mA", "kA"),
}
_RECORDS: Final = (
    ("flux, cumulative", "flux"),
    ("increments of the flux", "dflux"),
    ("voltage", "voltage"),
)


@dataclass(frozen=True)
class _Field:
    """Column and unit of one quantity."""

    column: Any
    unit: Any
    row: Any


class LayoutFields:
    """Delimiter, decimal mark, header, and a column with its unit for each quantity.

    Parameters
    ----------
    changed : callable
        Called after each change by hand.

    Attributes
    ----------
    delimiter, decimal, samples : ipywidgets.Dropdown
        How cells are parted, the decimal mark, what was recorded.
    skip : ipywidgets.BoundedIntText
        Lines before the header.
    header : ipywidgets.Checkbox
        Whether there is a row of names.
    rate, per_count : ipywidgets.Text
        Readings per second where no time stands; travel per count of an encoder.
    columns : dict of str to field
        By quantity: ``.column`` and ``.unit``.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, changed: Callable[[], None]) -> None:
        import ipywidgets

        self._changed, self._following = changed, False
        self._headings: tuple[Heading, ...] = ()
        self.delimiter = _dropdown("Delimiter", _DELIMITERS, "fm-delimiter")
        self.decimal = _dropdown("Decimal", (("point  .", "."), ("comma  ,", ",")), "fm-decimal")
        self.skip = hooked(
            ipywidgets.BoundedIntText(
                description="Skip lines",
                min=0,
                max=100_000,
                continuous_update=False,
                style={"description_width": "70px"},
            ),
            "fm-skip",
        )
        self.header = hooked(
            ipywidgets.Checkbox(description="header row", value=True, indent=False), "fm-header"
        )
        self.samples = _dropdown("Recorded", _RECORDS, "fm-samples")
        self.rate = _typed("or rate", "such as 100 Hz", "fm-rate")
        self.per_count = _typed("or per count", "such as 5 um", "fm-per-count")
        extras = {"time": (self.rate,), "position": (self.per_count,)}
        self.columns = {name: _field(name, extras.get(name, ())) for name in QUANTITIES}
        how = (self.delimiter, self.decimal, self.skip, self.header)
        rows = [self.columns[name].row for name in QUANTITIES]
        self.widget = column((row(how), row((self.samples,)), *rows), "fm-layout")
        self._show_recorded()
        for widget in self._all():
            widget.observe(self._on_change, names="value")

    def fill(self, guess: TableGuess) -> None:
        """Fill in a guess; nobody is told."""
        self._following = True
        self.delimiter.value, self.decimal.value = guess.delimiter, guess.decimal
        self.skip.value, self.header.value = guess.skip_lines, guess.header
        self.rate.value = self.per_count.value = ""
        found = next((name for name in RECORDED if name in guess.columns), "flux")
        self.samples.value = found
        for name, field in self.columns.items():
            told = guess.columns.get(name)
            choice = NONE if told is None else told.column
            field.column.options = [("–", NONE), *([(str(choice), choice)] if told else [])]
            field.column.value = choice
            field.unit.value = "" if told is None else told.unit
        self._show_recorded()
        self._following = False

    def offer(self, headings: Sequence[Heading]) -> None:
        """Offer the columns that a table has; a choice that is there stays."""
        self._following = True
        self._headings = tuple(headings)
        texts = [one.text for one in headings]
        options: list[tuple[str, str | int]] = [
            (
                f"{i}: {short(text)}" if text else f"{i}",
                text if texts.count(text) == 1 and text else i,
            )
            for i, text in enumerate(texts, start=1)
        ]
        values = [value for _, value in options]
        for field in self.columns.values():
            chosen = self._same(field.column.value, values)
            field.column.options = [("–", NONE), *options]
            field.column.value = chosen
        self._following = False

    def raw(self) -> dict[str, Any]:
        """The section as a campaign file would have it; what is usual is left out."""
        raw: dict[str, Any] = {}
        if self.delimiter.value != ",":
            raw["delimiter"] = self.delimiter.value
        if self.decimal.value != ".":
            raw["decimal"] = self.decimal.value
        if self.skip.value:
            raw["skip_lines"] = self.skip.value
        if not self.header.value:
            raw["header"] = False
        for name in self._shown():
            self._add(raw, name)
        return raw

    def _add(self, raw: dict[str, Any], name: str) -> None:
        """Add what is chosen for one quantity."""
        field = self.columns[name]
        rate, per_count = self.rate.value.strip(), self.per_count.value.strip()
        if name == "time" and rate:
            raw["rate"] = rate
            return
        if field.column.value == NONE:
            return
        spec: dict[str, Any] = {"column": field.column.value}
        if name == "position" and per_count:
            spec["per_count"] = per_count
        elif field.unit.value.strip() and not self._states_unit(field):
            spec["unit"] = field.unit.value.strip()
        heading = self._heading(field.column.value)
        usual = heading is not None and heading.name == name and len(spec) == 1
        if not usual:
            raw[name] = spec

    def _states_unit(self, field: _Field) -> bool:
        """Whether the heading states that very unit itself."""
        heading = self._heading(field.column.value)
        return heading is not None and heading.unit == field.unit.value.strip()

    def _heading(self, choice: str | int) -> Heading | None:
        if isinstance(choice, int):
            index = choice - 1
            return self._headings[index] if 0 <= index < len(self._headings) else None
        return next((one for one in self._headings if one.text == choice), None)

    def _same(self, chosen: str | int, values: Sequence[str | int]) -> str | int:
        """The option that stands for an earlier choice: by value, by number or by name."""
        if chosen in values or chosen == NONE:
            return chosen
        if isinstance(chosen, int) and 1 <= chosen <= len(values):
            return values[chosen - 1]
        return NONE

    def _shown(self) -> tuple[str, ...]:
        return ("time", "position", str(self.samples.value), "temperature", "current")

    def _show_recorded(self) -> None:
        shown = self._shown()
        for name, field in self.columns.items():
            field.row.layout.display = "" if name in shown else "none"

    def _all(self) -> tuple[Any, ...]:
        fields = [part for one in self.columns.values() for part in (one.column, one.unit)]
        how = (self.delimiter, self.decimal, self.skip, self.header, self.samples)
        return (*how, self.rate, self.per_count, *fields)

    def _on_change(self, _: dict[str, Any]) -> None:
        if not self._following:
            self._show_recorded()
            self._changed()


def _field(name: str, extras: Sequence[Any]) -> _Field:
    import ipywidgets

    chosen = _dropdown(name.capitalize(), (("–", NONE),), f"fm-column-{name}", "92px")
    unit = hooked(
        ipywidgets.Combobox(
            description="unit",
            options=_UNITS[name],
            placeholder="as in the heading",
            ensure_option=False,
            continuous_update=False,
            style={"description_width": "34px"},
        ),
        "fm-unit-box",
        f"fm-unit-{name}",
    )
    return _Field(chosen, unit, row((chosen, unit, *extras), "fm-layout-row"))


def _dropdown(
    description: str, options: Sequence[tuple[str, str]], hook: str, width: str = "70px"
) -> Any:
    import ipywidgets

    choice = ipywidgets.Dropdown(
        description=description, options=options, style={"description_width": width}
    )
    return hooked(choice, "fm-choice", hook)


def _typed(description: str, placeholder: str, hook: str) -> Any:
    import ipywidgets

    field = ipywidgets.Text(
        description=description,
        placeholder=placeholder,
        continuous_update=False,
        style={"description_width": "86px"},
    )
    return hooked(field, "fm-unit-box", hook)
