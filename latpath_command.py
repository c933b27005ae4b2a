"""The command `latpath`: outside of its package, whose import takes a second or two.

Nothing is at stake before a command has begun, so Ctrl-C just ends the process until then.
"""

from __future__ import annotations

import signal


def main() -> None:
    """Run the command line."""
    before = signal.getsignal(signal.SIGINT)
    if before is signal.default_int_handler:  # else someone wants it ignored, say nohup
        signal.signal(signal.SIGINT, signal.SIG_DFL)
    from pyomo_latpath.cli import main as commands

    signal.signal(signal.SIGINT, before)
    commands(prog_name="latpath")
