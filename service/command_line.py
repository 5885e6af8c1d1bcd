"""Read the command line and do what it asks."""

import argparse
from collections.abc import Sequence
from importlib.metadata import version


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status; `None` takes the arguments of this process."""
    parser = argparse.ArgumentParser(
        prog="hourwright", description="Turn a fleet of flexible energy assets and a market window into schedules."
    )
    parser.add_argument("--version", action="version", version=f"hourwright {version('hourwright')}")
    parser.parse_args(arguments)
    parser.print_help()
    return 0
