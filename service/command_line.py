"""Read the command line and do what it asks."""

import argparse
import os
import sys
from collections.abc import Sequence
from datetime import datetime
from importlib.metadata import version
from pathlib import Path

from schemas.cautions import CAUTIONS
from schemas.records import QUEUES
from service.command_help import DEMO_HELP, KEEP_HELP, PLAN_HELP, SERVE_HELP, UP_HELP, WORK_HELP

INTERRUPTED, NOBODY_READS = 130, 141
"""What a shell reports for SIGINT and SIGPIPE."""


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
        "demo",
        help="start a service, have an invented fleet planned and print it",
        description=DEMO_HELP,
        formatter_class=as_written,
    )
    demo.add_argument(
        "--out",
        metavar="DIR",
        type=Path,
        help="a new or empty folder for the answers (default: hourwright-demo- and the time, in the current folder)",
    )
    demo.set_defaults(run=_demo)
    _add_up(commands)
    _add_processes(commands)
    return parser


def _add_up(commands: "argparse._SubParsersAction[argparse.ArgumentParser]") -> None:
    up = commands.add_parser(
        "up",
        help="run everything on one machine, Redis included",
        description=UP_HELP,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    up.add_argument(
        "--data", metavar="DIR", type=Path, required=True, help="folder of this deployment; made if need be"
    )
    up.add_argument("--host", default="127.0.0.1", help="address to listen at (default: %(default)s)")
    up.add_argument("--port", metavar="N", type=_port, default=8080, help="port to listen at (default: %(default)s)")
    up.add_argument(
        "--workers",
        metavar="K",
        type=_at_least_one,
        default=1,
        help="jobs planned at a time, besides one urgent one (default: %(default)s)",
    )
    up.add_argument("--no-auth", action="store_true", help="ask nobody for a key; on a loopback address only")
    up.add_argument(
        "--sample",
        action="store_true",
        help="store invented fleets and windows and print a command for each job to try",
    )
    up.set_defaults(run=_up)


def _add_processes(commands: "argparse._SubParsersAction[argparse.ArgumentParser]") -> None:
    told = (
        ("serve", "run the API alone", SERVE_HELP),
        ("work", "run one worker", WORK_HELP),
        ("keep", "run the keeper", KEEP_HELP),
    )
    for name, line, words in told:
        process = commands.add_parser(
            name, help=line, description=words, formatter_class=argparse.RawDescriptionHelpFormatter
        )
        process.set_defaults(run=_become)
        if name == "work":
            process.add_argument("--queue", choices=QUEUES, help="the queue to serve, whatever HOURWRIGHT_QUEUE says")


# What one command needs is imported when it is asked for: no command waits for what only another one uses.


def _plan(given: argparse.Namespace) -> int:
    from service import plan_command

    return plan_command.plan(given.file, given.threads)


def _demo(given: argparse.Namespace) -> int:
    from service.demo import over_http

    return over_http.demo(sys.stdout, given.out, datetime.now().astimezone())


def _up(given: argparse.Namespace) -> int:
    from service import up

    wish = up.Wish(
        given.data,
        host=given.host,
        port=given.port,
        workers=given.workers,
        no_auth=given.no_auth,
        sample=given.sample,
    )
    return up.up(wish)


def _become(given: argparse.Namespace) -> int:
    from service.processes import become

    chosen = {} if getattr(given, "queue", None) is None else {"HOURWRIGHT_QUEUE": given.queue}
    become(given.command, {**os.environ, **chosen})


def _at_least_one(text: str) -> int:
    if not text.isascii() or not text.isdigit() or not 1 <= int(text) <= 1024:
        raise argparse.ArgumentTypeError(f"a whole number from 1 to 1024 is expected, not {text!r}")
    return int(text)


def _port(text: str) -> int:
    if not text.isascii() or not text.isdigit() or not 1 <= int(text) <= 65535:
        raise argparse.ArgumentTypeError(f"a whole number from 1 to 65535 is expected, not {text!r}")
    return int(text)
