"""What all commands share: paths to read and write, and how a complaint is written."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import click

UNREADABLE, INTERRUPTED = 2, 130

INPUT = click.Path(path_type=Path)
OUTPUT = click.Path(path_type=Path, dir_okay=False)


def in_a_folder(_: click.Context, parameter: click.Parameter, path: Path | None) -> Path | None:
    """Refuse a file whose folder is missing before hours are spent on its content."""
    if path is not None and not path.parent.is_dir():
        raise click.BadParameter(f"there is no folder {str(path.parent)!r}", param=parameter)
    return path


def names_of(files: Sequence[Path]) -> list[str]:
    """File names where they tell the files apart, else whole paths."""
    names = [path.name for path in files]
    return names if len(set(names)) == len(names) else [str(path) for path in files]


def complain(words: str) -> None:
    """Write a sentence to stderr."""
    click.echo(f"latpath: {words}", err=True)
