"""Read the command line and do what it asks."""

import argparse
import os
import sys
from collections.abc import Sequence
from importlib.metadata import version

from schemas.cautions import CAUTIONS

INTERRUPTED, NOBODY_READS = 130, 141
"""What a shell reports for SIGINT and SIGPIPE."""

PLAN_HELP = """\
Plan one request, a job as JSON with its fleet and window inline, without a service. Standard output carries one JSON
document: the schedule, the diagnosis, or what is wrong with the request; standard error has it in a line for a person.

exit status:
  0    a schedule that passed the audit (or, of a task `check`, one without a violation)
  1    a fault of ours, not of the request
  2    not taken: the file cannot be read, is no JSON, breaks a rule or asks for what is not done yet
  3    it cannot be met, and why (or, of a task `check`, a schedule with violations)
  4    undecided: time ran out with neither a schedule nor a proof that there is none
"""

DEMO_HELP = """\
Plan the day of an invented co-operative of batteries and print it for a person to read; then the same day after a trip
that no schedule can meet, and why. It takes a few seconds.

exit status:
  0    the first day has a schedule in which everything holds, and the second is proven impossible
  1    something did not hold; it is named
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status; `None` takes the arguments of this process.

    Without a command it prints its help to standard error and returns 2: a script that lost it must notice.
    """
    parser = _parser()
    given = parser.parse_args(arguments)
    if given.command is None:
        parser.print_help(sys.stderr)
        return 2
    try:
        status: int = given.run(given)
        sys.stdout.flush()
    except KeyboardInterrupt:
        return INTERRUPTED
    except BrokenPipeError:
        # What is still buffered would raise it again when Python ends.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return NOBODY_READS
    return status


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="hourwright",
        description="Turn a fleet of flexible energy assets and a market window into audited schedules.",
        epilog=" ".join(CAUTIONS),
    )
    parser.add_argument("--version", action="version", version=f"hourwright {version('hourwright')}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", title="commands")
    as_written = argparse.RawDescriptionHelpFormatter
    plan = commands.add_parser(
        "plan", help="plan one request file without a service", description=PLAN_HELP, formatter_class=as_written
    )
    plan.add_argument("file", metavar="FILE", help="the request as JSON; - for standard input")
    plan.add_argument(
        "--threads",
        metavar="N",
        type=_at_least_one,
        help="independent parts of the fleet solved side by side (default: the processors this command may use)",
    )
    plan.set_defaults(run=_plan)
    demo = commands.add_parser(
        "demo", help="plan an invented fleet and print it", description=DEMO_HELP, formatter_class=as_written
    )
    demo.set_defaults(run=_demo)
    return parser


# What one command needs is imported when it is asked for: no command waits for what only another one uses.


def _plan(given: argparse.Namespace) -> int:
    from service import plan_command

    return plan_command.plan(given.file, given.threads)


def _demo(_given: argparse.Namespace) -> int:
    from service.demo import running

    return running.run(sys.stdout)


def _at_least_one(text: str) -> int:
    if not text.isascii() or not text.isdigit() or not 1 <= int(text) <= 1024:
        raise argparse.ArgumentTypeError(f"a whole number from 1 to 1024 is expected, not {text!r}")
    return int(text)
