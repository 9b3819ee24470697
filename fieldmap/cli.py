"""The same verbs from a shell: demo, lab, reduce, report, export."""

from __future__ import annotations

import argparse
import json
import os
import re
import sys
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

import fieldmap
from fieldmap.atomic import is_folder, new_folder, replacing_set
from fieldmap.errors import FieldmapError, InputError
from fieldmap.estimate.map import with_axis
from fieldmap.readings import corrected
from fieldmap.shipped import demo_folder, notebook_folder
from fieldmap.units import si

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    import xarray as xr

    from fieldmap.bench.confirmation import Confirmation
    from fieldmap.bench.fault_trials import FaultTrials
    from fieldmap.magnet.results import Results
    from fieldmap.progress import Tell
    from fieldmap.readings import Campaign, Correction, Limit
    from fieldmap.show.report.parts import Section

__all__ = ["main"]

REFUSED = 2
INTERRUPTED = 130
BAR = "{desc} {bar} {elapsed}"
STEPS_OF_A_SOLVE = 12  # about: of one line, both knot spacings; the bar stretches
SHOWN_DEMO = "gap_dipole"


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the process if not given.

    Returns
    -------
    int
        0: results given, whatever the verdict; 2: refused, one sentence on standard error.
    """
    parser = _parser()
    chosen, rest = parser.parse_known_args(arguments)
    chosen.options = rest
    if rest and chosen.run is not _lab:
        parser.error(f"unknown argument {rest[0]!r}")
    try:
        run: Callable[[argparse.Namespace], None] = chosen.run
        run(chosen)
    except FieldmapError as error:
        print(f"fieldmap: {error}", file=sys.stderr)
        return REFUSED
    except KeyboardInterrupt:
        print("fieldmap: stopped; no file is half written.", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except Exception as error:  # noqa: BLE001 - a fault of the kit's own is one sentence, too
        print(
            f"fieldmap: found a fault of its own, {type(error).__name__}: {error}; "
            "please report it with the campaign; nothing was replaced.",
            file=sys.stderr,
        )
        return REFUSED
    return 0


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="fieldmap",
        description="Field profile, integrated field and magnetic length, with uncertainties, "
        "from the partial integrals of moving-coil and moving-wire scans.",
    )
    parser.add_argument("--version", action="version", version=f"fieldmap {fieldmap.__version__}")
    verbs = parser.add_subparsers(metavar="COMMAND", required=True)

    demo = verbs.add_parser("demo", help="copy the demo campaigns and notebooks, reduce one")
    demo.add_argument("folder", nargs="?", default="fieldmap-demo", metavar="FOLDER")
    demo.set_defaults(run=_demo)

    lab = verbs.add_parser(
        "lab", help="open JupyterLab on the notebooks; further options are passed on to it"
    )
    lab.add_argument("folder", nargs="?", default="fieldmap-demo", metavar="FOLDER")
    lab.set_defaults(run=_lab)

    reduce = verbs.add_parser("reduce", help="reduce a campaign to a map, results and a report")
    reduce.add_argument("campaign", metavar="CAMPAIGN", help="campaign.toml, or its folder")
    reduce.add_argument("--out", required=True, metavar="DIR", help="folder for the files")
    reduce.add_argument(
        "--confirm",
        type=int,
        metavar="TRIALS",
        help="check the uncertainties by that many trials of the whole chain (JCGM 101); 100 take "
        "a minute or more",
    )
    reduce.add_argument(
        "--faults",
        type=int,
        metavar="TRIALS",
        help="put every kind of fault into the campaign measured again, that many times at each of "
        "five severities, and say what would go unseen; one takes some minutes",
    )
    reduce.add_argument(
        "--correct",
        action="append",
        default=[],
        metavar="PASS",
        help="switch on the corrections that findings offer for this pass, or for all of them by "
        "'all'; may be given several times",
    )
    reduce.set_defaults(run=_reduce)

    report = verbs.add_parser("report", help="write the report again, from the map alone")
    report.add_argument("map", metavar="MAP", help="map.nc, or the folder that holds it")
    report.add_argument("--out", required=True, metavar="DIR", help="folder for report.html")
    report.add_argument(
        "--against",
        metavar="OTHER",
        help="compare with another map, or a design profile in .csv or .nc",
    )
    report.add_argument(
        "--same-bench",
        action="store_true",
        help="the other map was taken with the same probes and stage: their errors are common",
    )
    report.set_defaults(run=_report)

    export = verbs.add_parser("export", help="write a plain table of a map: CSV or NetCDF")
    # "-300mm" is a position, not an option, with or without the blank before its unit
    export._negative_number_matcher = re.compile(r"-\.?[0-9]")  # noqa: SLF001 no public way
    export.add_argument("map", metavar="MAP", help="map.nc, or the folder that holds it")
    export.add_argument("--out", required=True, metavar="FILE", help="a name in .csv or .nc")
    export.add_argument("--step", metavar="STEP", help='as in "1 mm"; that of the map if left out')
    export.add_argument("--from", dest="start", metavar="POSITION", help='as in "-300 mm"')
    export.add_argument("--to", dest="stop", metavar="POSITION", help='as in "300 mm"')
    export.add_argument("--line", type=int, default=0, metavar="INDEX", help="0 if left out")
    export.add_argument(
        "--off-axis",
        metavar="DISTANCE",
        help='adds the field there, as in "5 mm": from the axis of a solenoid or the median plane '
        "of a dipole",
    )
    export.set_defaults(run=_export)
    return parser


def _reduce(chosen: argparse.Namespace) -> None:
    _reduce_campaign(
        Path(chosen.campaign),
        Path(chosen.out),
        trials=chosen.confirm,
        correct=chosen.correct,
        faults=chosen.faults,
    )


def _reduce_campaign(
    source: Path,
    out: Path,
    truth: Path | None = None,
    trials: int | None = None,
    correct: Sequence[str] = (),
    faults: int | None = None,
) -> None:
    """Reduce, write, and print what a person wants to read."""
    from fieldmap.show.cautions import caution_text
    from fieldmap.show.tables import summary_text

    done = _with_progress(source, out, trials, correct, faults)
    known = json.loads(truth.read_text(encoding="utf-8"))["results"] if truth else None
    print(summary_text(done.results, done.limits, truth=known))
    if done.corrections:
        print(f"\n{done.corrections}")
    if done.confirmation is not None:
        from fieldmap.show.confirmation import confirmation_text

        print(f"\n{confirmation_text(done.confirmation)}")
    if done.faults is not None:
        from fieldmap.show.faults import faults_text

        print(f"\n{faults_text(done.faults)}")
    print(f"\nWritten: {', '.join(str(file) for file in done.files)}\n")
    print(caution_text())


class _Reduced(NamedTuple):
    """What a reduction gave; the corrections that are switched on are in words."""

    results: Results
    limits: tuple[Limit, ...]
    confirmation: Confirmation | None
    faults: FaultTrials | None
    files: tuple[Path, ...]
    corrections: str


def _with_progress(
    source: Path, out: Path, trials: int | None, correct: Sequence[str], faults: int | None
) -> _Reduced:
    """Load, stitch, evaluate and save, with a bar on standard error when it takes a while."""
    from tqdm import tqdm

    from fieldmap.show.corrections import by_hand, chosen_corrections, switched_on_text

    with tqdm(delay=2, leave=False, disable=None, dynamic_ncols=True, bar_format=BAR) as bar:

        def tell(step: str) -> None:
            bar.set_description(step, refresh=False)
            if bar.total is not None:
                bar.total = max(bar.total, bar.n + 2)
            bar.update()

        campaign = fieldmap.load(source, tell=tell)
        bar.reset(total=STEPS_OF_A_SOLVE * len({(one.x, one.y) for one in campaign.passes}))
        fmap = fieldmap.stitch(campaign, tell=tell)
        results = fieldmap.evaluate(fmap, campaign)
        added: Sequence[Correction] = ()
        if correct:
            added = chosen_corrections(campaign, results.findings, correct)
            campaign = corrected(campaign, added)
            fmap = fieldmap.stitch(campaign, tell=tell)
            fmap = with_axis(fmap, campaign.axis, by_hand(added))
            results = fieldmap.evaluate(fmap, campaign)
        confirmation, put_in, extra = _trials(campaign, fmap, trials, faults, tell)
        files = fieldmap.save_reduction(fmap, results, out, extra=extra)
    words = switched_on_text(fmap, added)
    return _Reduced(results, campaign.limits, confirmation, put_in, files, words)


def _trials(
    campaign: Campaign, fmap: xr.Dataset, trials: int | None, faults: int | None, tell: Tell
) -> tuple[Confirmation | None, FaultTrials | None, list[Section]]:
    """Trials of the whole chain, and faults put in, as wanted; and their parts of the report."""
    from fieldmap.show.report import confirmation_section, faults_section

    confirmation, put_in = None, None
    extra: list[Section] = []
    if trials is not None:
        from fieldmap.bench.trials import confirm

        confirmation = confirm(campaign, fmap, trials=trials, tell=tell)
        extra.append(confirmation_section(confirmation))
    if faults is not None:
        from fieldmap.bench.fault_trials import fault_trials

        put_in = fault_trials(campaign, fmap, trials=faults, tell=tell)
        extra.append(faults_section(put_in))
    return confirmation, put_in, extra


def _report(chosen: argparse.Namespace) -> None:
    from fieldmap.magnet.comparison import compare
    from fieldmap.show.comparison import comparison_text
    from fieldmap.show.report import comparison_section, save_report
    from fieldmap.show.report.page import FILE_NAME

    fmap = fieldmap.load_map(_map_file(chosen.map))
    extra = []
    if chosen.against is not None:
        comparison = compare(fmap, _map_file(chosen.against), same_bench=chosen.same_bench)
        extra = [comparison_section(comparison)]
        print(f"{comparison_text(comparison)}\n")
    print(f"Written: {save_report(fmap, Path(chosen.out) / FILE_NAME, extra=extra)}")


def _map_file(given: str) -> Path:
    """The map, or that in a folder."""
    path = Path(given)
    return path / "map.nc" if is_folder(path) else path


def _export(chosen: argparse.Namespace) -> None:
    from fieldmap.magnet.handover import export_table

    source, out = _map_file(chosen.map), Path(chosen.out)
    if out.resolve() == source.resolve():
        raise InputError(str(out), "the map itself", "another file", "give the table its own name")
    table = export_table(
        fieldmap.load_map(source),
        out,
        step=_length(chosen.step, "--step"),
        limits=(_length(chosen.start, "--from"), _length(chosen.stop, "--to")),
        line=chosen.line,
        off_axis=_length(chosen.off_axis, "--off-axis"),
    )
    print("\n".join(f"{statement}." for statement in table.statements()))
    print(f"\nWritten: {out}")


def _length(text: str | None, option: str) -> float | None:
    """A length given on the command line, m."""
    return None if text is None else si(text, "m", option)


def _demo(chosen: argparse.Namespace) -> None:
    folder = _copy_demo(Path(chosen.folder))
    source = folder / "demo_data" / SHOWN_DEMO
    print(f"Demo campaigns and notebooks: {folder}")
    print(f"$ fieldmap reduce {source / 'campaign.toml'} --out {source / 'reduced'}\n")
    truth = source / "truth.json"
    _reduce_campaign(source / "campaign.toml", source / "reduced", truth)


def _copy_demo(folder: Path) -> Path:
    """Copy what is not there yet: files that exist, perhaps edited, are kept."""
    for origin in (demo_folder(), notebook_folder()):
        target = folder / ("demo_data" if origin.name == "demo_data" else "notebooks")
        for place in (origin, *sorted(one for one in origin.rglob("*") if one.is_dir())):
            if ".ipynb_checkpoints" not in place.parts:
                _copy_files(place, target / place.relative_to(origin))
    return folder


def _copy_files(origin: Path, target: Path) -> None:
    """Copy the files of one folder that are missing, all of them or none."""
    files = sorted(one for one in origin.iterdir() if one.is_file())
    names = [one.name for one in files if not os.path.lexists(target / one.name)]
    if not names:
        return
    with new_folder(target) as folder, replacing_set(folder, names) as asides:
        for aside in asides:
            aside.write_bytes((origin / aside.name).read_bytes())


def _lab(chosen: argparse.Namespace) -> None:
    folder = _copy_demo(Path(chosen.folder))
    command = [sys.executable, "-m", "jupyterlab", str(folder / "notebooks"), *chosen.options]
    os.execv(sys.executable, command)  # noqa: S606 our own interpreter, no shell
