"""The command `latpath explain`: why a relaxation is fractional, and what can be done."""

from __future__ import annotations

import json
import sys
import traceback
from pathlib import Path
from typing import Any

import click

from .cli_common import INPUT, OUTPUT, UNREADABLE, complain, in_a_folder, names_of
from .explain.explain import explain as explain_form
from .explain.explanation import Explanation
from .explain.telling.page import to_html
from .explain.telling.text import to_text
from .files import sentence, whole_file
from .forms.from_file import read
from .pages.markup import visible

EXPLAINED, NOT_TO_THE_END = 0, 1


@click.command()
@click.argument("files", nargs=-1, required=True, type=INPUT, metavar="FILE...")
@click.option(
    "--html",
    "page",
    type=OUTPUT,
    callback=in_a_folder,
    metavar="OUT",
    help="Write the answer as one self-contained page, too. One FILE only.",
)
@click.option("--json", "as_json", is_flag=True, help="One JSON object per file and line.")
@click.option("--time-limit", type=click.FloatRange(min=0), help="Seconds for each file.")
@click.option("--seed", type=click.IntRange(min=0), default=0, show_default=True)
def explain(
    files: tuple[Path, ...],
    page: Path | None,
    as_json: bool,
    time_limit: float | None,
    seed: int,
) -> None:
    """Explain where and why the relaxation of a model is fractional, and what can be done.

    FILE is .mps, .lp, .min or .asn, each also .gz. One that cannot be read does not stop the
    others. The first 24 lines say it all, the details follow. Ctrl-C ends the search, and tells
    what was found by then; what was left open is told as well.

    Fields of --json: instance, error, and those of an explanation (complete tells whether every
    question was answered to the end).

    \b
    Exit status:
      0  every file was explained
      1  stopped by Ctrl-C, or the time ran out before the relaxation of some file was solved
      2  wrong usage, or some file could not be read or written
    """
    if page is not None and len(files) > 1:
        raise click.UsageError("--html takes one FILE only")
    code = EXPLAINED
    for k, (path, name) in enumerate(zip(files, names_of(files), strict=True)):
        if k and not as_json:
            click.echo()
        told = _explained(path, time_limit, seed)
        if isinstance(told, str):
            complain(told)
            code = UNREADABLE
            if as_json:
                click.echo(json.dumps({"instance": name, "error": told}))
            continue
        _show(told, name, as_json)
        code = max(code, _code(told), _write(page, told, name))
        if told.interrupted:
            break
    sys.exit(code)


def _explained(path: Path, time_limit: float | None, seed: int) -> Explanation | str:
    """The answer, or a sentence on what went wrong."""
    try:
        form = read(path)
    except (OSError, ValueError) as error:
        return sentence(error)
    try:
        return explain_form(form, time_limit=time_limit, seed=seed, progress=_progress)
    except Exception as error:
        # A defect of ours must not cost the files that follow; it is shown in full.
        traceback.print_exc()
        return f"{path}: {type(error).__name__}: {error}"


def _progress(doing: str) -> None:
    if sys.stderr.isatty():
        click.echo(f"latpath: {doing}", err=True)


def _show(told: Explanation, name: str, as_json: bool) -> None:
    if as_json:
        fields: dict[str, Any] = {"instance": name, "error": None} | told.to_dict()
        click.echo(json.dumps(fields, allow_nan=False))
    else:
        click.echo(f"{visible(name)}\n{to_text(told)}")


def _write(page: Path | None, told: Explanation, name: str) -> int:
    """Write the page asked for; return the exit status that this calls for."""
    if page is None:
        return EXPLAINED
    try:
        with whole_file(page) as file:
            file.write(to_html(told, name))
    except OSError as error:
        complain(sentence(error))
        return UNREADABLE
    return EXPLAINED


def _code(told: Explanation) -> int:
    unsolved = told.fractional is None and told.no_optimum is None
    return NOT_TO_THE_END if told.interrupted or unsolved else EXPLAINED
