"""Arguments in, messages and exit codes out."""

from __future__ import annotations

import argparse
import os
import re
import sys
import time
from collections.abc import Sequence
from typing import TYPE_CHECKING, TextIO

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from mapper.exports.contents import RunResult
    from mapper.ranking import Ranking
    from mapper.uncertainty.spread import SpreadFound

DONE, OUR_FAULT, USERS_INPUT = 0, 1, 2


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; returns the exit code: 0 done, 2 the user's input, 1 our fault."""
    parser = _parser()
    chosen = parser.parse_args(arguments)
    if chosen.command is None:
        parser.print_help()
        return DONE
    from mapper.errors import MapperError  # noqa: PLC0415 - --help imports none of the libraries

    try:
        code = int(chosen.action(chosen))
        sys.stdout.flush()  # here, so that a reader who has gone away is noticed
    except BrokenPipeError:  # whoever reads has enough, as head does
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return DONE
    except MapperError as problem:
        print(f"saprolite: {problem}", file=sys.stderr)  # noqa: T201
        return USERS_INPUT
    except KeyboardInterrupt:
        print(  # noqa: T201
            "\nsaprolite: stopped; run the same command again to go on where it stopped",
            file=sys.stderr,
        )
        return 130
    return code


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="saprolite",
        description="Map and add up the CO2 that rock weathering takes up: grids of lithology, "
        "temperature, runoff and vegetation in; drawdown maps and regional totals out.",
        epilog="Screening estimates, not verified removal. Exit code 0: done; 2: something in "
        "the input to mend, with what to write instead; 1: a fault of saprolite.",
    )
    commands = parser.add_subparsers(dest="command", metavar="COMMAND")
    run = commands.add_parser("run", help="run a job and write its folder of maps and tables")
    run.add_argument("job", metavar="JOB", help="the job file (TOML)")
    run.add_argument("--out", metavar="DIR", help="folder to write; default: the job's own")
    run.add_argument("--fresh", action="store_true", help="start over where a run was cut short")
    run.add_argument("--threads", type=_positive, metavar="N", help="default: all processors")
    run.add_argument(
        "--scheduler", metavar="ADDRESS", help="a dask scheduler, or 'local' for processes here"
    )
    run.add_argument("--memory", type=_size, metavar="SIZE", help="such as 2GB; default 2GB")
    run.set_defaults(action=_run)
    inspect = commands.add_parser("inspect", help="look at a job before it runs, problems and all")
    inspect.add_argument("job", metavar="JOB", help="the job file (TOML)")
    inspect.add_argument(
        "--write-legend",
        metavar="FILE",
        help="write every code of the geological map to a legend for you to fill in, and stop",
    )
    inspect.add_argument(
        "--pictures", metavar="DIR", help="write a small picture of each layer into a folder"
    )
    inspect.set_defaults(action=_inspect)
    verify = commands.add_parser("verify", help="check that a run folder is what it claims")
    verify.add_argument("folder", metavar="RUN", help="the folder of a finished run")
    verify.set_defaults(action=_verify)
    laws = commands.add_parser("laws", help="list the rate laws, or show one")
    laws.add_argument("name", nargs="?", metavar="NAME", help="a law to show in full")
    laws.add_argument("--plot", metavar="FILE", help="draw its response curves (png, svg, pdf)")
    laws.add_argument(
        "--compare", nargs="+", metavar="NAME", help="several laws side by side at one place"
    )
    laws.add_argument(
        "--at",
        nargs="+",
        metavar="LAYER=VALUE",
        help="the place: runoff=800 temperature=12C (or 285K) vegetation=0.6 rock=basalt",
    )
    laws.set_defaults(action=_laws)
    return parser


def _positive(text: str) -> int:
    if not text.isdigit() or int(text) < 1:
        raise argparse.ArgumentTypeError(f"{text!r} is not a whole number of 1 or more")
    return int(text)


def _size(text: str) -> float:
    match = re.fullmatch(r"([0-9.]+)\s*([kMGT]?)i?B?", text.strip())
    if not match or float(match[1]) <= 0:
        raise argparse.ArgumentTypeError(f"{text!r} is not a size such as 500MB or 2GB")
    return float(match[1]) * 1000.0 ** " kMGT".index(match[2] or " ")


def _run(chosen: argparse.Namespace) -> int:
    from mapper.pipeline import Engine, run  # noqa: PLC0415
    from mapper.planning import open_job  # noqa: PLC0415

    asked = {name: getattr(chosen, name) for name in ("threads", "scheduler", "memory")}
    given = {name: value for name, value in asked.items() if value is not None}
    bar = ProgressBar(sys.stderr)
    job = open_job(chosen.job)
    result = run(
        job,
        out=chosen.out,
        fresh=chosen.fresh,
        engine=Engine(**given),
        progress=bar.update,
    )
    bar.close()
    print("\n".join(summary_lines(job.title, result)))  # noqa: T201
    return DONE


def summary_lines(title: str, result: RunResult) -> list[str]:
    """What a run found, for the terminal."""
    from mapper.exports.alternatives import spread_lines  # noqa: PLC0415

    found = result.totals
    consumption, drawdown = found.consumption.sum(), found.drawdown.sum()
    mapped, valid = found.rock_area.sum(), found.valid_area.sum()
    bars = ["", ""] if result.spread is None else _error_bars(result.spread.intervals.everything)
    lines = [
        title,
        f"  drawdown, long term      {drawdown:14,.0f} t CO2 per year{bars[1]}",
        f"  consumption, short term  {consumption:14,.0f} t CO2 per year{bars[0]}",
        f"  over {valid:,.0f} km2: {100 * valid / mapped if mapped else 0:.1f} % of the "
        f"{mapped:,.0f} km2 of mapped rock had data",
    ]
    lines.extend(_flag_lines(result))
    lines.extend(spread_lines(result.laws))
    if result.ranking is None:
        lines.extend(_top_regions(result))
    else:
        lines.extend(_ranked_regions(result.ranking))
    if result.spread is not None:
        lines.extend(_driving_quantities(result.spread))
    lines.append(f"  {result.folder} ({result.seconds:.1f} s)")
    lines.append("  A screening estimate, not verified removal.")
    return lines


def _error_bars(everything: NDArray[np.float64]) -> list[str]:
    return [f", 5 to 95 %: {low:,.0f} to {high:,.0f}" for low, _, high in everything]


def _ranked_regions(ranking: Ranking) -> list[str]:
    from mapper.ranking import ranking_lines  # noqa: PLC0415

    unit = "t CO2 per km2 and year" if ranking.spec.by.endswith("km2_yr") else "t CO2 per year"
    lines = [f"  most {ranking.spec.by.split('_')[0]}, {unit}:"]
    width = max((len(one.region) for one in ranking.places[:5]), default=0)
    for one in ranking.places[:5]:
        low_high = (
            "" if one.interval is None else f"  ({one.interval[0]:,.4g} to {one.interval[2]:,.4g})"
        )
        lines.append(f"    {one.region:{width}}  {one.value:14,.4g}{low_high}")
    lines += [f"    {line}" for line in ranking_lines(ranking, most=5)]
    if ranking.left_out:
        lines.append(f"    {len(ranking.left_out)} regions left out by the ranking's conditions")
    return lines


def _driving_quantities(spread: SpreadFound) -> list[str]:
    """What drives the spread of the drawdown most, and where the totals over states are off."""
    from mapper.uncertainty.spread import MOST_APART  # noqa: PLC0415

    share = spread.drawdown_shares.share
    most = sorted((key for key in share if share[key] > 0), key=lambda key: -share[key])[:3]
    lines = []
    if most:
        told = ", ".join(f"{key} {100 * share[key]:.0f} %" for key in most)
        lines.append(f"  what drives the spread of the drawdown: {told}")
    worst = max(spread.drawn.apart.values())
    if worst > MOST_APART:
        lines.append(f"  intervals are rough: totals over states are off by up to {worst:.1e}")
    return lines


def _flag_lines(result: RunResult) -> list[str]:
    """One line for each cause that holds on some ground."""
    from mapper.exports.tables import CAUSES  # noqa: PLC0415

    found = result.totals
    mapped = float(found.rock_area.sum())
    held = {cause: area for cause, area in found.flagged.items() if area > 0}
    if sum(cause.endswith("_outside") for cause in held) == 1:
        held.pop("outside_law_range")  # says nothing more than its one cause
    if not held:
        return []
    width = max(len(_short(CAUSES[cause])) for cause in held)
    return [
        "  of the mapped rock, by cause:",
        *(
            f"    {_short(CAUSES[cause]):{width}}  {area:12,.1f} km2  {100 * area / mapped:5.1f} %"
            for cause, area in held.items()
        ),
    ]


def _short(meaning: str) -> str:
    return meaning.partition(":")[0]


def _top_regions(result: RunResult) -> list[str]:
    found = result.totals
    by_region = found.drawdown.sum(axis=1)
    order = sorted(range(len(found.names) - 1), key=lambda at: -by_region[at])[:5]
    if not order:
        return []
    width = max(len(found.names[at]) for at in order)
    lines = ["  most drawdown, t CO2 per year:"]
    lines += [f"    {found.names[at]:{width}}  {by_region[at]:14,.0f}" for at in order]
    return lines


def _inspect(chosen: argparse.Namespace) -> int:
    from mapper.inspection import inspect  # noqa: PLC0415
    from mapper.planning import open_job  # noqa: PLC0415

    if chosen.write_legend:
        from mapper.exports.starter import write_starter_legend  # noqa: PLC0415

        count = write_starter_legend(open_job(chosen.job), chosen.write_legend)
        print(f"{count} codes in {chosen.write_legend}: fill in the column 'rock'")  # noqa: T201
        return DONE
    report = inspect(open_job(chosen.job))
    print("\n".join(report.lines()))  # noqa: T201
    if chosen.pictures:
        from mapper.exports.starter import write_pictures  # noqa: PLC0415

        names = write_pictures(report.plan, chosen.pictures)
        print(f"pictures    {', '.join(names)} in {chosen.pictures}")  # noqa: T201
    return DONE


def _verify(chosen: argparse.Namespace) -> int:
    from mapper.exports.verify import verify  # noqa: PLC0415

    found = verify(chosen.folder)
    print("\n".join(f"checked  {line}" for line in found.checked))  # noqa: T201
    found.raise_if_different()
    print("The folder is what its record claims.")  # noqa: T201
    return DONE


def _laws(chosen: argparse.Namespace) -> int:
    from mapper.exports.catalogue import law_lines, laws_lines  # noqa: PLC0415
    from mapper.exports.comparison import comparison_lines, read_conditions  # noqa: PLC0415

    _check_laws_arguments(chosen)
    if chosen.compare:
        names = [chosen.name, *chosen.compare] if chosen.name else chosen.compare
        lines = comparison_lines(names, chosen.at or [])
    elif chosen.plot:
        from mapper.exports.curves import plot_law  # noqa: PLC0415 - matplotlib is slow to load

        path = plot_law(chosen.name, chosen.plot, read_conditions(chosen.at or []))
        lines = [f"{path}: response curves of {chosen.name}"]
    else:
        lines = law_lines(chosen.name) if chosen.name else laws_lines()
    print("\n".join(lines))  # noqa: T201
    return DONE


def _check_laws_arguments(chosen: argparse.Namespace) -> None:
    from mapper.errors import LawError  # noqa: PLC0415

    if chosen.plot and not chosen.name:
        raise LawError(
            "which law to draw is not said",
            where="saprolite laws --plot",
            fix=f"saprolite laws dessert-2003 --plot {chosen.plot}",
        )
    if chosen.plot and chosen.compare:
        raise LawError(
            "--plot draws one law, and --compare prints a table of several",
            where="saprolite laws",
            fix="one of them at a time",
        )
    if chosen.at and not (chosen.plot or chosen.compare):
        raise LawError(
            "--at gives conditions, and nothing here is evaluated at them",
            where="saprolite laws --at",
            fix="with --compare A B, or with NAME --plot FILE",
        )


class ProgressBar:
    """Progress on a terminal as one line that is overwritten, elsewhere as lines now and then.

    Nothing is shown for work that ends within a second.
    """

    def __init__(self, stream: TextIO) -> None:
        self.stream = stream
        self.live = stream.isatty()
        self.stage = ""
        self.began = time.monotonic()
        self.start_done = 0
        self.last = self.began
        self.shown = False

    def update(self, stage: str, done: int, total: int) -> None:
        """Say how far a stage has come."""
        now = time.monotonic()
        if stage != self.stage:
            self.stage, self.began, self.start_done, self.last = stage, now, done, now
        pause = 0.2 if self.live else 10.0
        if now - self.began < 1.0 or (now - self.last < pause and done < total):
            return
        self.last = now
        rate = (done - self.start_done) / max(now - self.began, 1e-9)
        left = (total - done) / rate if rate else 0.0
        share = done / total if total else 1.0
        text = (
            f"{stage:7} {100 * share:5.1f} %  {rate / 1e6:6.2f} million cells/s  "
            f"{_clock(left)} left"
        )
        self._show(text, share)

    def _show(self, text: str, share: float) -> None:
        self.shown = True
        if self.live:
            filled = int(24 * share)
            self.stream.write(f"\r[{'#' * filled}{'.' * (24 - filled)}] {text}\x1b[K")
        else:
            self.stream.write(text + "\n")
        self.stream.flush()

    def close(self) -> None:
        """End the line that was overwritten."""
        if self.shown and self.live:
            self.stream.write("\r\x1b[K")
            self.stream.flush()


def _clock(seconds: float) -> str:
    minutes, rest = divmod(int(seconds + 0.5), 60)
    hours, minutes = divmod(minutes, 60)
    return f"{hours}:{minutes:02d}:{rest:02d}" if hours else f"{minutes}:{rest:02d}"


if __name__ == "__main__":
    sys.exit(main())
