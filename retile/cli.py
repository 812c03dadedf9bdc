"""The command line: options, exit statuses and messages.  Each command loads its own module when it is called.

Exit statuses: 0 done; 1 the answer is no; 2 the call is wrong or a file cannot be used, with nothing on standard
output; 130 interrupted.  An error of retile itself ends with 70 (``EX_SOFTWARE`` of the BSD header sysexits.h).
"""

from __future__ import annotations

import gc
import os
import sys
from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from . import __version__

if TYPE_CHECKING:
    from .commands.compiling import CompilerOptions
    from .commands.opening import Facts

# What a call makes, it needs to its end: looking for garbage every few hundred objects would find none.
gc.set_threshold(100_000)

_BUG, _INTERRUPTED, _CLOSED_PIPE = 70, 130, 141
_TRACEBACK = "RETILE_TRACEBACK"  # set to anything to see where an error of retile itself comes from
_F = TypeVar("_F", bound=Callable[..., Any])


def main() -> None:
    """The program ``retile``."""
    _open_streams()
    status = _run(sys.argv[1:])
    gc.freeze()  # the interpreter would look through all that there is for garbage, and longer than some answers take
    sys.exit(status)


def _open_streams() -> None:
    """Give streams that the caller closed something to lead to; else the next file that is opened would be one of them."""
    while (handle := os.open(os.devnull, os.O_RDWR)) <= 2:
        pass
    os.close(handle)
    sys.stdout = sys.stdout or open(1, "w", encoding="utf-8", closefd=False)
    sys.stderr = sys.stderr or open(2, "w", encoding="utf-8", closefd=False)


def _tell(message: str) -> None:
    """A message to standard error, if that can be written."""
    try:
        print(message, file=sys.stderr, flush=True)
    except OSError:
        pass


def _run(arguments: list[str]) -> int:
    """Run one call and give its exit status; the one place where errors become messages."""
    try:
        status = retile.main(arguments, prog_name="retile", standalone_mode=False)
        sys.stdout.flush()
        return status if isinstance(status, int) else 0
    except click.ClickException as error:
        error.show()
        return 2
    except (click.Abort, KeyboardInterrupt):
        _tell("Interrupted.")
        return _INTERRUPTED
    except Exception as error:
        return _failed(error)


def _failed(error: Exception) -> int:
    from .commands.output import ClosedPipe
    from .model import RetileError

    if isinstance(error, ClosedPipe):
        return _CLOSED_PIPE
    if isinstance(error, RetileError):
        _tell(str(error))
        return 2
    if isinstance(error, OSError):
        _tell(f"retile: {error.filename or 'system'}: {error.strerror or error}")
        return 2
    if os.environ.get(_TRACEBACK):
        import traceback

        traceback.print_exception(error)
    what = "it ran out of memory" if isinstance(error, MemoryError) else f"{type(error).__name__}: {error}"
    _tell(f"retile: this is an error in retile, not in your code ({what}).\n"
          f"No file was changed. Please report it with the command, the C file and what this prints:\n"
          f"    {_TRACEBACK}=1 retile ...")
    return _BUG


# ---------------------------------------------------------------- shared options

def _compiler_options(command: _F) -> _F:
    """The options of all commands that read C."""
    for option in reversed((
            click.option("-D", "define", multiple=True, metavar="NAME[=VALUE]", help="Define a macro."),
            click.option("-U", "undefine", multiple=True, metavar="NAME", help="Undefine a macro, also one of -D."),
            click.option("-I", "folder", multiple=True, metavar="DIR", help="Look for headers here too."),
            click.option("-include", "include", multiple=True, metavar="FILE", help="Read a header before the file."),
            click.option("-std", "standard", metavar="STD", help="Language standard, as in -std=c11."),
            click.option("--cc", metavar="COMMAND", help="C compiler to ask and to measure with (default: cc)."),
            click.option("-p", "database", metavar="DIR", help="Take flags from DIR/compile_commands.json."))):
        command = option(command)
    return command


def _compiling(given: dict[str, Any]) -> CompilerOptions:
    """Take the compiler options out of a command's parameters."""
    from .commands.compiling import CompilerOptions

    flags = [word for name, flag in (("define", "-D"), ("undefine", "-U"), ("folder", "-I"), ("include", "-include"))
             for value in given.pop(name) for word in (flag, value)]
    standard = given.pop("standard")
    if standard:
        flags.insert(0, f"-std={standard}")
    return CompilerOptions(given.pop("cc"), tuple(flags), given.pop("database"))


_json = click.option("--json", "as_json", is_flag=True, help="Print one JSON document instead of text.")
_address = click.argument("address", metavar="FILE:LINE")
_plan = click.argument("plan", metavar="PLAN")
_remainder = click.option("--remainder", type=click.Choice(["clamp", "peel"]),
                          help="How the last, shorter chunk is written where the plan does not say (default: clamp): "
                               "with a bound on every chunk, or as loops of its own.")
_reassociate = click.option("--reassociate", is_flag=True,
                            help="Let sums and other updates 'x = x op e' be done in another order, which may round "
                                 "differently.")
_trust = click.option("--trust", is_flag=True,
                      help="Leave out the test of what the verdict assumes, and with it the original loops.")


def _fact_options(command: _F) -> _F:
    """What the user knows of sizes and arrays."""
    for option in reversed((
            click.option("--assume", "relations", multiple=True, metavar="RELATION",
                         help="A relation between sizes that holds, as in \"lda >= n\" (repeatable)."),
            click.option("--distinct", multiple=True, metavar="A,B",
                         help="Arrays that do not overlap, or one array whose rows do not (repeatable)."))):
        command = option(command)
    return command


def _facts(given: dict[str, Any]) -> Facts:
    """Take the user's facts out of a command's parameters."""
    from .commands.opening import Facts

    return Facts(given.pop("relations"), given.pop("distinct"))


def _defaults(given: dict[str, Any]) -> dict[str, str | None]:
    """Take the options that hold for plans which do not name them out of a command's parameters."""
    return {"remainder": given.pop("remainder", None), "reassociate": "yes" if given.pop("reassociate") else None}


# ---------------------------------------------------------------- commands

@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, "-V", "--version", message="%(prog)s %(version)s")
def retile() -> None:
    """Reorder and tile the loops of a C function: verdict, code, proof of equal results, timings.

    A nest is named by its address, FILE:LINE of its outermost for. A PLAN lists the loops from outermost to innermost:
    "k:64 i k j" walks over chunks of 64 iterations of k, and in each of them over i, k and j.
    """


@retile.command(short_help="List the loop nests of C files.")
@click.argument("files", metavar="FILE...", nargs=-1, required=True)
@click.option("--all", "every", is_flag=True, help="List inner loops under their own address too.")
@_compiler_options
@_json
def nests(files: tuple[str, ...], every: bool, as_json: bool, **given: Any) -> int:
    """List the loop nests of C files, and for each whether retile can read it or why not."""
    from .commands import nests

    return nests.run(files, _compiling(given), every=every, as_json=as_json)


@retile.command(short_help="Show the dependences of a nest.")
@_address
@click.option("--dot", is_flag=True, help="Print the graph in the DOT language of Graphviz.")
@click.option("--graph", metavar="FILE", help="Draw the graph: FILE.svg for a picture, FILE.dot for Graphviz.")
@click.option("--space", metavar="FILE", help="Draw the iterations of the deepest statement into FILE.svg.")
@click.option("--plan", metavar="PLAN", help="With --space: number the iterations in the order of a plan.")
@click.option("--set", "sizes", multiple=True, metavar="NAME=VALUE",
              help="With --space: a size, such as n=7 (repeatable).")
@_fact_options
@_compiler_options
@_json
def depend(address: str, dot: bool, graph: str | None, space: str | None, plan: str | None, sizes: tuple[str, ...],
           as_json: bool, **given: Any) -> int:
    """Show the dependences of a nest: the pairs of statements whose order matters. Pictures replace the table."""
    from .commands import depend, pictures

    if dot and as_json:
        raise click.UsageError("--dot and --json exclude each other.")
    if space is None and (plan is not None or sizes):
        raise click.UsageError("--plan and --set belong to --space FILE.svg.")
    wanted = pictures.Pictures(graph, space, plan, sizes)
    return depend.run(address, _compiling(given), facts=_facts(given), dot=dot, pictures=wanted, as_json=as_json)


@retile.command(short_help="Say whether a plan computes the same.")
@_address
@_plan
@_reassociate
@_fact_options
@_compiler_options
@_json
def check(address: str, plan: str, as_json: bool, **given: Any) -> int:
    """Say whether the nest computes the same in the order of a plan, and if not, show two executions that clash."""
    from .commands import check

    return check.run(address, plan, _compiling(given), facts=_facts(given), defaults=_defaults(given), as_json=as_json)


@retile.command(short_help="List legal plans worth a trial.")
@_address
@click.option("--set", "sizes", multiple=True, metavar="NAME=VALUE",
              help="A size, such as n=1000, where it is known (repeatable).")
@click.option("--most", type=click.IntRange(min=1), default=10, show_default=True, help="How many plans at most.")
@_fact_options
@_compiler_options
@_json
def suggest(address: str, sizes: tuple[str, ...], most: int, as_json: bool, **given: Any) -> int:
    """List legal plans that are worth a trial on this machine, the most promising first, each with the reason."""
    from .commands import suggest

    return suggest.run(address, sizes, _compiling(given), facts=_facts(given), most=most, as_json=as_json)


@retile.command(short_help="Write the loops of a plan.")
@_address
@_plan
@_remainder
@_reassociate
@_trust
@_fact_options
@click.option("-o", "file", metavar="FILE", help="Write to FILE.")
@click.option("--diff", "as_diff", is_flag=True, help="Write a patch, for 'git apply' and 'patch -p1'.")
@click.option("--in-place", is_flag=True, help="Replace the file.")
@click.option("--verify", is_flag=True, help="First judge, build and run the variant; write nothing unless it is right.")
@_compiler_options
@_json
def rewrite(address: str, plan: str, trust: bool, verify: bool, file: str | None, as_diff: bool, in_place: bool, as_json: bool,
            **given: Any) -> int:
    """Write the whole file with the nest in the order of a plan; all other text stays as it is."""
    from .commands import rewrite

    if in_place and (file is not None or as_diff):
        raise click.UsageError("--in-place excludes -o and --diff.")
    target = rewrite.Target(file, in_place, as_diff, as_json)
    return rewrite.run(address, plan, _compiling(given), facts=_facts(given), defaults=_defaults(given), trust=trust,
                       verify=verify, target=target)


@retile.command(short_help="Build, verify and time the variants of plans.")
@_address
@click.argument("plans", metavar="PLAN...", nargs=-1)
@click.option("--set", "sizes", multiple=True, metavar="NAME=VALUE", help="A size, such as n=1000 (repeatable).")
@click.option("--fill", "fills", multiple=True, metavar="ARRAY=WAY",
              help="What an array holds at first: random, positive, diagonal-dominant or zero (repeatable).")
@click.option("--seconds", type=click.FloatRange(min=0, min_open=True), default=10.0, show_default=True,
              help="Time for the clocking of all variants together.")
@click.option("--seed", type=int, default=1, show_default=True, help="Of the random contents.")
@click.option("--flags", metavar="TEXT", help="Flags of the timed builds (default: '-O3 -march=native').")
@click.option("-o", "result", metavar="FILE", help="Where to keep all samples (default: a new file here).")
@click.option("--plot", metavar="FILE", help="Draw the speedups of every round into FILE.svg, .png or .pdf.")
@_remainder
@_reassociate
@_trust
@_fact_options
@_compiler_options
@_json
def measure(address: str, plans: tuple[str, ...], as_json: bool, sizes: tuple[str, ...], fills: tuple[str, ...],
            seconds: float, seed: int, flags: str | None, result: str | None, plot: str | None, trust: bool, **given: Any) -> int:
    """Build the original and the variants of plans, verify that they compute the same, and time them on this host.

    Without plans it tries the suggested ones, then plans near the fastest of them, at most 25 in all.
    """
    from .commands import measure

    measuring = measure.Measuring(sizes, fills, seconds, seed, flags, _defaults(given), _facts(given), trust, result, plot)
    return measure.run(address, plans, _compiling(given), measuring, as_json=as_json)


@retile.command(short_help="Find out about this machine.")
@_json
def host(as_json: bool) -> int:
    """Show what retile found out about this machine: caches, compilers, clock."""
    from .commands import host

    return host.run(as_json=as_json)


if __name__ == "__main__":
    main()
