"""The registry of shared options, and what every command does alike: help, output files, exit codes.

Options and the commands that take them:

    --json FILE|-, --csv FILE|-     every command with a result
    --picture FILE                  forecast, sounding, spray, compare, odds, score
    --netcdf FILE                   commands that run a case
    --units metric|us               every command with text
    --quiet, --accept-doubt         every command
    --hours N                       commands that run a case
    --profile --latitude --longitude --elevation --zone --cover     first use, commands that run a case

Exit codes: 0 done; 1 bad data, in a file, or no answer from it; 2 bad usage: a flag, its value, or one that is missing;
3 done, with a doubt from `DOUBTS`.
"""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Callable, Iterable, Iterator
from datetime import UTC, datetime
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Any, Final, Self, TypeVar

import click

from forcing.errors import DaylayerError

F = TypeVar("F", bound=Callable[..., Any])

DONE: Final = 0
BAD_DATA: Final = 1
BAD_USAGE: Final = 2
DOUBTFUL: Final = 3

DOUBTS: Final[dict[str, str]] = {
    "profile_age": "the profile is over 12 h old",
    "release_distance": "the release is over 150 km or 300 m of height away",
    "top_of_profile": "the layer reaches the profile's top",
    "saturated_layer": "the layer is saturated or topped by fog or stratus",
    "wind_unknown": "the wind is unknown where it decides",
    "failed_rows": "rows of a batch failed",
}
"""The doubts that end a command with exit code 3, by code."""

PICTURE_ENDINGS: Final = (".png", ".svg", ".pdf")


if TYPE_CHECKING:
    _Parameter = click.ParamType[datetime]
else:
    _Parameter = click.ParamType  # older releases of click cannot be subscripted


class Moment(_Parameter):
    """An ISO 8601 moment with an offset; a naive one is refused."""

    name = "moment"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> datetime:
        """Parse to an aware datetime in UTC."""
        if isinstance(value, datetime):
            moment = value
        else:
            try:
                moment = datetime.fromisoformat(str(value))
            except ValueError:
                self.fail(f"'{value}' is not an ISO 8601 time; write it like 2026-07-14T11:30Z.", param, ctx)
        if moment.tzinfo is None:
            self.fail(f"'{value}' has no offset; add Z or one like +02:00.", param, ctx)
        return moment.astimezone(UTC)


class Command(click.Command):
    """A command whose help starts with an example."""

    def __init__(self, *args: Any, example: str = "", **kwargs: Any) -> None:
        self.example = example
        super().__init__(*args, **kwargs)
        self.context_settings = {"help_option_names": ["-h", "--help"], **self.context_settings}

    def format_help(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the example first, then usage, text and options."""
        write_example(self.example, formatter)
        super().format_help(ctx, formatter)


def write_example(example: str, formatter: click.HelpFormatter) -> None:
    """Put example lines at the head of a help page."""
    if example:
        with formatter.section("Example"):
            for line in example.strip().splitlines():
                formatter.write(f"{'':>{formatter.current_indent}}{line.strip()}\n")
        formatter.write("\n")


def _picture(ctx: click.Context, param: click.Parameter, value: str | None) -> str | None:
    if value is not None and Path(value).suffix.lower() not in PICTURE_ENDINGS:
        raise click.BadParameter(f"'{value}' must end in {', '.join(PICTURE_ENDINGS)}.", ctx=ctx, param=param)
    return value


def _zone(ctx: click.Context, param: click.Parameter, value: str | None) -> str | None:
    if value is not None:
        from forcing.zones import check_zone

        with _as_usage(ctx, param):
            check_zone(value, place="")
    return value


def _cover(ctx: click.Context, param: click.Parameter, value: str | None) -> str | None:
    if value is not None:
        from forcing.own_covers import resolve

        with _as_usage(ctx, param):
            resolve(value, {})
    return value


@contextlib.contextmanager
def _as_usage(ctx: click.Context, param: click.Parameter) -> Iterator[None]:
    """Turn the error of a flag's value into one of usage."""
    try:
        yield
    except DaylayerError as error:
        raise click.BadParameter(str(error), ctx=ctx, param=param) from None


json_option = click.option("--json", "json_file", metavar="FILE|-", help="Write the result as JSON; - is stdout.")
csv_option = click.option("--csv", "csv_file", metavar="FILE|-", help="Write the table as CSV; - is stdout.")
netcdf_option = click.option("--netcdf", "netcdf_file", metavar="FILE", help="Write the result as CF NetCDF.")
picture_option = click.option(
    "--picture", "picture_file", metavar="FILE", callback=_picture, help="Draw it: png, svg or pdf by ending."
)
units_option = click.option(
    "--units",
    type=click.Choice(["metric", "us"]),
    default="metric",
    show_default=True,
    help="Units of the text and the picture; files stay metric.",
)
quiet_option = click.option("--quiet", is_flag=True, help="No text on stdout, no remarks on stderr.")
accept_doubt_option = click.option("--accept-doubt", is_flag=True, help="End with 0 instead of 3 when in doubt.")
hours_option = click.option("--hours", type=click.IntRange(1, 240), help="Length of the run.")
valid_option = click.option(
    "--valid", type=Moment(), metavar="TIME", help="Release or record time, ISO 8601 with offset."
)
latitude_option = click.option("--latitude", type=click.FloatRange(-90.0, 90.0), help="Degrees north.")
longitude_option = click.option("--longitude", type=click.FloatRange(-180.0, 360.0), help="Degrees east.")
elevation_option = click.option("--elevation", type=click.FloatRange(-500.0, 9000.0), help="Ground above sea level, m.")
profile_option = click.option("--profile", "profile_file", metavar="FILE", help="A balloon profile to start from.")
zone_option = click.option("--zone", metavar="NAME", callback=_zone, help="Time zone, e.g. America/Chicago.")
cover_option = click.option(
    "--cover", metavar="NAME", callback=_cover, help="Land cover; `daylayer covers` lists them."
)


def stacked(*options: Callable[[F], F]) -> Callable[[F], F]:
    """Join options into one decorator, shown in help in the order given."""

    def decorate(function: F) -> F:
        for option in reversed(options):
            function = option(function)
        return function

    return decorate


first_use_options = stacked(
    profile_option, latitude_option, longitude_option, elevation_option, zone_option, cover_option
)


class Outputs:
    """Files of one command: all appear, or none.

    Use as a context manager. Every file is written to a temporary name beside its target and renamed when the
    block ends well; `-` is held back until then and goes to stdout. One target may be named only once, and never
    the input.
    """

    def __init__(self, *, inputs: Iterable[str] = ()) -> None:
        self._inputs = {self._key(name) for name in inputs}
        self._taken: set[str] = set()
        self._moves: list[tuple[Path, Path]] = []
        self._stdout: str | None = None

    @staticmethod
    def _key(target: str) -> str:
        return target if target == "-" else str(Path(target).resolve())

    @property
    def on_stdout(self) -> bool:
        """Whether a file was asked for on stdout, so that the text has to stay away."""
        return self._stdout is not None

    def __enter__(self) -> Self:
        return self

    def path(self, target: str) -> Path:
        """A temporary path with the target's ending, to be written by the caller before the block ends."""
        key = self._key(target)
        if key in self._inputs:
            raise click.UsageError(f"'{target}' is an input and would be overwritten; name another file.")
        if key in self._taken:
            raise click.UsageError(f"'{target}' is named twice; every output needs its own file.")
        self._taken.add(key)
        final = Path(target).resolve()
        try:
            is_folder, is_device = final.is_dir(), final.exists() and not final.is_file()
        except OSError as error:  # a name that no file system takes
            raise DaylayerError(
                f"cannot be written: {error.strerror}", place=target, remedy="name a file you may write"
            ) from error
        if is_folder:
            raise DaylayerError("is a folder", place=target, remedy="name a file in it")
        if not final.parent.is_dir():
            raise DaylayerError("its folder does not exist", place=target, remedy="make the folder first")
        if is_device:
            return final  # a device or a pipe is written as it is: renaming over it would replace it
        draft = final.with_name(f".{final.stem}-{os.urandom(4).hex()}{final.suffix}")
        self._moves.append((draft, final))
        return draft

    def text(self, target: str, content: str) -> None:
        """Write text to a file, or keep it for stdout."""
        if target == "-":
            if self._stdout is not None:
                raise click.UsageError("only one output can go to stdout.")
            self._stdout = content
            return
        self.path(target).write_text(content, encoding="utf-8")

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if kind is not None:
            for draft, _ in self._moves:
                with contextlib.suppress(OSError):
                    draft.unlink(missing_ok=True)
            self._explain(error)
            return
        for draft, final in self._moves:
            draft.replace(final)
        if self._stdout is not None:
            click.echo(self._stdout, nl=not self._stdout.endswith("\n"))

    def _explain(self, error: BaseException | None) -> None:
        """Name the file that was asked for where its temporary one could not be written."""
        if isinstance(error, OSError) and error.filename is not None:
            for draft, final in self._moves:
                if str(error.filename) == str(draft):
                    raise DaylayerError(
                        f"cannot be written: {error.strerror}", place=str(final), remedy="name a file you may write"
                    ) from error


def remark(text: str, *, quiet: bool = False) -> None:
    """Say something beside the result, on stderr."""
    if not quiet:
        click.echo(text, err=True)


def finish(doubts: Iterable[str], *, accept: bool, quiet: bool = False) -> None:
    """End the command: 3 where there is a doubt that is not accepted, else 0. Doubts are named on stderr."""
    found = list(doubts)
    for doubt in found:
        remark(f"doubt: {doubt}", quiet=quiet)
    if found and not accept:
        click.get_current_context().exit(DOUBTFUL)


def silence_stdout() -> None:
    """Point stdout at nothing, after its reader has gone, so that the flush at exit stays quiet."""
    with contextlib.suppress(OSError, ValueError):
        nothing = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nothing, sys.stdout.fileno())
