"""Whether the facts and arrays of a map are of the kinds that every later step relies on."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from dataclasses import fields
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fieldmap.estimate.parameters import UNITS
from fieldmap.readings.passes import (
    Axis,
    FlipReference,
    Limit,
    Magnet,
    PointReference,
    ZeroReference,
)
from fieldmap.readings.probe import Coil, Integrator, Stage, Wire
from fieldmap.readings.sections import RESULT_UNITS

if TYPE_CHECKING:
    from collections.abc import Mapping

    import xarray as xr

__all__ = ["check_arrays", "check_facts"]

Test = Callable[[Any], bool]


def _number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and _finite(value)


def _finite(value: float) -> bool:
    return -1e300 < value < 1e300  # squares are taken of most


def _whole(value: Any) -> bool:
    return isinstance(value, int) and not isinstance(value, bool) and 0 <= value < 2**53


def _text(value: Any) -> bool:
    return isinstance(value, str) and value == value.encode(errors="replace").decode()


def _flag(value: Any) -> bool:
    return isinstance(value, bool)


def _pair(value: Any) -> bool:
    return isinstance(value, list) and len(value) == 2 and all(map(_number, value))


def _maybe(test: Test) -> Test:
    return lambda value: value is None or test(value)


def _listed(test: Test) -> Test:
    return lambda value: isinstance(value, list) and all(map(test, value))


# Kinds of the fields of records, as they are annotated.
_KINDS: Final[Mapping[str, Test]] = {
    "float": _number,
    "float | None": _maybe(_number),
    "int": lambda value: _whole(abs(value)) if _number(value) else False,
    "tuple[float, float]": _pair,
    "Probe": _text,  # by its name
}
_PASS: Final[Mapping[str, Test]] = {
    **dict.fromkeys(("name", "sha256", "probe", "integrator", "record"), _text),
    **dict.fromkeys(("x", "y", "from", "to", "duration", "chi_square", "freedom"), _number),
    **dict.fromkeys(("walk_noise", "read_noise"), _number),
    **dict.fromkeys(("walk_stated", "read_stated"), _flag),
    "readings": _whole,
}
_UNKNOWN: Final[Mapping[str, Test]] = {
    "kind": lambda value: _text(value) and value in UNITS,
    "where": _text,
    "unit": _text,
    "mean": _number,
    "sd": lambda value: _number(value) and value > 0,
}
_LINE: Final[Mapping[str, Test]] = {
    "x": _number,
    "y": _number,
    "references": _listed(_whole),
    "unknowns": _listed(lambda one: _has(one, _UNKNOWN)),
}
_DIMENSIONS: Final[Mapping[str, str]] = {
    "y x z": "B B_se n_readings",
    "y x basis": "coefficient",
    "y x basis basis_2": "coefficient_covariance",
    "y x effect": "nuisance",
    "y x effect effect_2": "nuisance_covariance",
    "y x basis effect": "shared_covariance",
    "y x end": "mapped_range",
    "y x knot_item": "knots",
    "increment": "residual residual_position residual_pass flux_increment increment_line "
    "design_count",
    "increment band": "walk_covariance read_covariance jitter_covariance",
    "entry": "design design_column",
    "reference": "reference_value reference_line",
    "reference basis": "reference_basis",
    "reference effect": "reference_effect",
    "line effect": "prior",
    "line basis effect": "frame_shift",
    "line power effect": "position_shift",
    "line difference": "roughness smooth_origin",
    "line difference effect": "smooth_effect",
}
_FINDING: Final[Mapping[str, Test]] = {
    **dict.fromkeys(("code", "where", "text"), _text),
    "severity": {"refuse", "warn", "note"}.__contains__,
}
_ONCE: Final[Mapping[str, type]] = {"magnet": Magnet, "axis": Axis, "stage": Stage}
_SEVERAL: Final[Mapping[str, type]] = {"integrators": Integrator, "limits": Limit}
_RECORDS: Final[Mapping[str, type]] = {
    "wire": Wire,
    "coil": Coil,
    "point": PointReference,
    "zero": ZeroReference,
    "flip": FlipReference,
}


def check_facts(fmap: xr.Dataset) -> None:
    """Raise ValueError for a fact of the wrong kind.

    Parameters
    ----------
    fmap : xarray.Dataset
        To be looked at.

    Raises
    ------
    ValueError
        Names the attribute.
    Exception
        Whatever the reader of JSON raises.
    """
    facts = {name: _json(fmap, name) for name in ("campaign", "lines", "passes", "findings")}
    forms = {"lines": _LINE, "passes": _PASS, "findings": _FINDING}
    for name, form in forms.items():
        _require(_listed(lambda one, form=form: _has(one, form))(facts[name]), name)  # type: ignore[misc]
    campaign = facts["campaign"]
    _require(_has(campaign, {"name": _text, "sha256": _text}), "campaign")
    for name, record in _ONCE.items():
        _require(_is_record(campaign[name], record), name)
    for name in ("probes", "references"):
        _require(_listed(_is_named_record)(campaign[name]), name)
    for name, record in _SEVERAL.items():
        _require(_listed(lambda one, record=record: _is_record(one, record))(campaign[name]), name)  # type: ignore[misc]
    _check_sense(campaign, facts)


def _check_sense(campaign: Mapping[str, Any], facts: Mapping[str, Any]) -> None:
    """Facts that contradict one another."""
    axis = campaign["axis"]
    (start, stop), (left, right) = axis["integrate"], axis["flat"]
    _require(start <= left < right <= stop and start < stop, "axis")
    _require(campaign["magnet"]["gap"] > 0, "magnet")
    for limit in campaign["limits"]:
        ends = [one for one in (limit["lower"], limit["upper"]) if one is not None]
        known = limit["result"] in RESULT_UNITS and ends == sorted(ends) and bool(ends)
        _require(known and (limit.get("k") or 1.0) > 0 and limit.get("guard", 1.0) >= 0, "limits")
    _require(bool(facts["lines"]), "lines")
    for name, key in (("probe", "probes"), ("integrator", "integrators")):
        names = {one["name"] for one in campaign[key]}  # none in a map that was made by hand
        _require(not names or all(one[name] in names for one in facts["passes"]), "passes")
    scans = {one["name"] for one in facts["passes"]}
    drifts = [u for line in facts["lines"] for u in line["unknowns"] if u["kind"] == "drift"]
    _require(all(one["where"] in scans for one in drifts), "lines")
    count = len(campaign["references"])
    for line in facts["lines"]:
        _require(all(1 <= number <= count for number in line["references"]), "lines")


def _json(fmap: xr.Dataset, name: str) -> Any:
    value = fmap.attrs[name]
    if not isinstance(value, str):
        raise ValueError(f"{name} is no text")  # noqa: TRY004 - one kind of error for all
    return json.loads(value)


def _has(value: Any, form: Mapping[str, Test]) -> bool:
    return isinstance(value, dict) and all(
        name in value and test(value[name]) for name, test in form.items()
    )


def _is_named_record(value: Any) -> bool:
    if not isinstance(value, dict) or not _text(value.get("kind")):
        return False
    record = _RECORDS.get(value["kind"])
    rest = {key: one for key, one in value.items() if key != "kind"}
    return record is not None and _is_record(rest, record)


def _is_record(value: Any, record: Any) -> bool:
    """Whether a dictionary has the fields of a record, each of its kind."""
    form = {one.name: _test_for(str(one.type)) for one in fields(record)}
    return _has(value, form) and set(value) == set(form)


def _test_for(annotation: str) -> Test:
    """What a field must pass by its annotation; a word out of a few is a text."""
    if annotation == "str" or annotation.startswith("Literal["):
        return _text
    return _KINDS.get(annotation, lambda _: True)


def _require(sound: bool, name: str) -> None:  # noqa: FBT001 - says what it takes
    if not sound:
        raise ValueError(f"{name} of another form")


def check_arrays(fmap: xr.Dataset) -> None:
    """Raise ValueError for an array that does not hold real numbers or does not fit.

    Parameters
    ----------
    fmap : xarray.Dataset
        To be looked at; `check_facts` has passed it.

    Raises
    ------
    ValueError
        Names the variable.
    """
    for name, variable in fmap.variables.items():
        _require(variable.dtype.kind in "if", str(name))
    for dims, names in _DIMENSIONS.items():
        for name in names.split():
            _require(fmap[name].dims == tuple(dims.split()), name)
    _check_sizes(fmap.sizes, len(json.loads(fmap.attrs["lines"])))
    for name in ("x", "y", "z"):
        _require(name in fmap.coords and fmap[name].dims == (name,), name)
        _require(_grows(fmap[name].values), name)
    passes, lines = json.loads(fmap.attrs["passes"]), json.loads(fmap.attrs["lines"])
    for name, count in (
        ("residual_pass", len(passes)),
        ("increment_line", len(lines)),
        ("reference_line", len(lines)),
    ):
        values = fmap[name].values
        _require(values.dtype.kind == "i" and _within(values, 0, count), name)
    for name in ("residual", "residual_position", "reference_value", "design", "flux_increment"):
        _require(_tame(fmap[name].values), name)
    for index, facts in enumerate(lines):
        _check_line(fmap.sel(x=facts["x"], y=facts["y"]), len(facts["unknowns"]))
        _require(bool((fmap["increment_line"].values == index).any()), "increment_line")
    _require(int(fmap["design_count"].sum()) == fmap.sizes["entry"], "design_count")


def _check_sizes(sizes: Mapping[Any, int], lines: int) -> None:
    """Dimensions that hang together."""
    basis, effects = sizes["basis"], sizes["effect"]
    wanted = {"basis_2": basis, "difference": basis - 3, "effect_2": effects, "line": lines}
    wanted |= {"end": 2, "knot_item": 3, "band": 2, "power": 2}
    for name, size in wanted.items():
        _require(sizes[name] == size, f"dimension {name}")


def _check_line(at: xr.Dataset, effects: int) -> None:
    """The estimate of one line: numbers throughout, and variances that are none below zero."""
    low, high = at["mapped_range"].values.tolist()
    start, spacing, size = at["knots"].values.tolist()
    _require(size == int(size) and 0 < size <= at.sizes["basis"], "knots")
    n = int(size)
    _require(spacing > 0 and _tame(np.array([start, spacing * n])), "knots")
    _require(start <= low < high <= start + spacing * n, "mapped_range")
    _require(effects <= at.sizes["effect"], "nuisance")
    parts = {
        "coefficient": at["coefficient"].values[:n],
        "coefficient_covariance": at["coefficient_covariance"].values[:n, :n],
        "nuisance": at["nuisance"].values[:effects],
        "nuisance_covariance": at["nuisance_covariance"].values[:effects, :effects],
        "shared_covariance": at["shared_covariance"].values[:n, :effects],
    }
    for name, values in parts.items():
        _require(_tame(values), name)
    for name in ("coefficient_covariance", "nuisance_covariance"):
        spread = parts[name]
        u = np.sqrt(np.maximum(np.diagonal(spread), 0.0))
        slack = 1e-6 * np.outer(u, u) + 1e-300
        _require(bool((np.diagonal(spread) >= 0).all()), name)
        _require(bool((np.abs(spread) <= np.outer(u, u) + slack).all()), name)
        _require(bool((np.abs(spread - spread.T) <= slack).all()), name)


def _grows(values: np.ndarray[Any, Any]) -> bool:
    return values.size > 0 and _tame(values) and bool((np.diff(values) > 0).all())


def _within(values: np.ndarray[Any, Any], low: int, count: int) -> bool:
    return bool(((values >= low) & (values < low + count)).all())


def _tame(values: np.ndarray[Any, Any]) -> bool:
    """Finite, with room for squares of squares."""
    return bool((np.abs(values) < 1e70).all()) and math.isfinite(float(values.sum()))
