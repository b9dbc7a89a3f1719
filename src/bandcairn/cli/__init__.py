"""The command line: one file a command, a few lines each; only here do errors become exit codes."""

from __future__ import annotations


def main() -> None:
    """Run the command line and leave with its exit code."""
    from bandcairn.cli.app import run_app

    run_app()
