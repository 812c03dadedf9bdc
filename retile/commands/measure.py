"""``retile measure``."""

from __future__ import annotations

import shlex
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..library import OpenNest
from ..model import Judgement, Plan, RetileError, Verdict
from ..report.document import of_measure_refused
from ..report.plot import check_plot_name, speedup_plot
from ..report.trials import campaign_lines
from ..report.verdict import verdict_lines
from ..values import dataclass
from .compiling import CompilerOptions
from .opening import Facts, open_nest
from .output import look_of, print_document, print_lines, say
from .sizes import named_sizes, named_value

if TYPE_CHECKING:
    from ..trial import Campaign, Event, Settings
    from ..trial.records import Progress

_INTERRUPTED = 130
_STAGES = {"judge": "judging", "verify": "verifying", "build": "building", "time": "timing"}


@dataclass(frozen=True)
class Measuring:
    """What the user said about measuring."""

    sizes: tuple[str, ...]  # NAME=VALUE
    fills: tuple[str, ...]  # ARRAY=WAY
    seconds: float
    seed: int
    flags: str | None  # of the timed builds, as one word of a shell line
    defaults: dict[str, str | None]  # options of plans that do not name them
    facts: Facts
    trust: bool
    result: str | None  # file for the records; None for one named after the time
    plot: str | None  # file for a picture of the speedups


def run(address: str, plans: tuple[str, ...], compiling: CompilerOptions, measuring: Measuring, *,
        as_json: bool) -> int:
    """Verify and time the variants of plans; 1 if a plan is not legal or a variant is not verified.

    Without plans it takes the suggested ones, and in a second round neighbours of the fastest.
    """
    if measuring.plot is not None:
        check_plot_name(measuring.plot)
    sizes = named_sizes(measuring.sizes)
    settings = _settings(measuring, compiling)
    nest = open_nest(address, compiling, measuring.facts)
    if not plans and not nest.refusals:
        _announce(nest)
        return _search(nest, address, sizes, settings, measuring, as_json)
    parsed = [plan if nest.refusals else nest.plan(plan, **measuring.defaults) for plan in plans]
    refused = [judgement for judgement in map(nest.check, parsed) if judgement.verdict is not Verdict.LEGAL]
    if refused:
        return _refuse(nest, refused, parsed, sizes, as_json)
    _announce(nest)
    with _progress() as on_progress:
        campaign = nest.measure(parsed, sizes, settings, on_progress=on_progress, command=_command(address, plans))
    return _report(campaign, measuring, as_json)


def _announce(nest: OpenNest) -> None:
    """Of all commands only this one, and ``rewrite --verify``, run what they are given."""
    say(f"Building and running the loops of {nest.address} and of its variants.")


def _search(nest: OpenNest, address: str, sizes: dict[str, int], settings: Settings, measuring: Measuring,
            as_json: bool) -> int:
    """Find a plan: suggested ones, then neighbours of the fastest."""
    if any(measuring.defaults.values()):
        raise RetileError("--remainder and --reassociate say how given plans are meant: name at least one PLAN.")
    with _progress() as on_progress:
        campaign = nest.search(sizes, settings, on_progress=on_progress, command=_command(address, ()))
    if campaign is not None:
        return _report(campaign, measuring, as_json)
    from ..report.suggestions import suggestion_lines

    advice = nest.suggest(sizes)
    if as_json:
        print_document({**of_measure_refused(nest.address, sizes, (), ()), "leave": advice.leave})
    else:
        print_lines(suggestion_lines(nest.address, nest.nest, sizes, advice, look_of(sys.stdout)))
    return 0


def _settings(measuring: Measuring, compiling: CompilerOptions) -> Settings:
    from ..trial import Settings

    try:
        flags = Settings().flags if measuring.flags is None else tuple(shlex.split(measuring.flags))
    except ValueError as error:
        raise RetileError(f"--flags {measuring.flags!r} cannot be split into words: {error}.") from None
    return Settings(cc=compiling.cc, flags=flags, fills=tuple(map(named_value, measuring.fills)), seed=measuring.seed,
                    seconds=measuring.seconds, trust=measuring.trust)


def _command(address: str, plans: tuple[str, ...]) -> str:
    return " ".join(shlex.quote(word) for word in ("retile", "measure", address, *plans))


def _refuse(nest: OpenNest, judgements: list[Judgement], plans: list[Any], sizes: dict[str, int], as_json: bool) -> int:
    """Nothing is measured unless every plan is legal: a slip should not cost the time of the others."""
    look = look_of(sys.stderr)
    for judgement in judgements:
        say("\n".join([*verdict_lines(nest.address, judgement, nest.place, look), ""]))
    say("Nothing was measured.")
    if as_json:
        known = {judgement.plan.text: judgement for judgement in judgements}
        pairs = [(plan, known.get(plan.text)) for plan in plans if isinstance(plan, Plan)]
        print_document(of_measure_refused(nest.address, sizes, pairs, nest.refusals))
    return 1


def _report(campaign: Campaign, measuring: Measuring, as_json: bool) -> int:
    import json

    from ..trial import as_text, write_result

    file = write_result(campaign, measuring.result)
    if measuring.plot is not None:
        from ..source import replace_file

        replace_file(measuring.plot, speedup_plot(campaign, Path(measuring.plot).suffix.lower()))
    if as_json:
        print_document({**json.loads(as_text(campaign)), "result": file})
    else:
        print_lines([*campaign_lines(campaign, look_of(sys.stdout)), "", f"All samples are in {file}"])
    if campaign.interrupted:
        say("Interrupted; what was measured so far is kept.")
        return _INTERRUPTED
    return 0 if campaign.all_verified else 1


@contextmanager
def _progress() -> Iterator[Progress | None]:
    """A line that says what goes on, on a terminal only."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console

    look = look_of(sys.stderr)
    console = Console(stderr=True, no_color=not look.colour)
    with console.status("reading") as status:
        def show(event: Event) -> None:
            count = f" {event.done + 1} of {event.total}" if event.stage != "time" else ""
            status.update(f"{_STAGES.get(event.stage, event.stage)}{count}: {event.text}".replace("[", "\\["))

        yield show
