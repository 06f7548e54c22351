"""The commands."""

from netpart.cli.main import build_parser, main

__all__ = ["build_parser", "main"]
