"""``python -m earthwork_cli``: the command line without its installed entry point."""

from .main import run

run()
