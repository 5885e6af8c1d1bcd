"""Plan the request in one file, with no service and no queue: `python -I -m workers.plan_file FILE`.

Standard output carries one JSON document and nothing else: the schedule, the diagnosis, or the problem document
(RFC 9457) of a request that is not taken. What a person should read goes to standard error.
"""

import argparse
import hashlib
import os
import signal
import sys
import time
import traceback
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor, wait
from datetime import UTC, datetime
from pathlib import Path
from types import FrameType
from typing import BinaryIO, TextIO

from pydantic import BaseModel

from schemas.diagnosis import Diagnosis
from schemas.problems import MAX_REPORTED_FAULTS, RefusedError
from schemas.reading import read_job, read_json
from schemas.schedule import Schedule, Undecided
from workers.planning.limits import Limits, Unwatched

MAX_FILE_MIB = 64

PLANNED, FAULT, NOT_TAKEN, CANNOT_BE_MET, UNDECIDED, INTERRUPTED, NOBODY_READS = 0, 1, 2, 3, 4, 130, 141
"""Exit statuses; the last two are what a shell reports for SIGINT and SIGPIPE."""

STATUS_OF = {
    "optimal": PLANNED,
    "feasible": PLANNED,
    "infeasible": CANNOT_BE_MET,
    "violated": CANNOT_BE_MET,
    "undecided": UNDECIDED,
}

_SECONDS_BETWEEN_SIGNS = 0.25
_SECONDS_WITHOUT_SIGN = 1.0


def main(arguments: Sequence[str] | None = None) -> int:
    """Plan the file named in the arguments and return the exit status; `None` takes the arguments of this process."""
    signal.signal(signal.SIGINT, _stop)
    given = _read_arguments(arguments)
    try:
        body = _read_file(given.file)
    except OSError as fault:
        _tell(f"{given.file}: cannot be read: {fault.strerror or fault}")
        return NOT_TAKEN
    if len(body) > MAX_FILE_MIB * 2**20:
        _tell(f"{given.file}: larger than {MAX_FILE_MIB} MiB, the most a request may have")
        return NOT_TAKEN
    try:
        with _output_kept_for_the_answer() as output:
            return _answer(body, given.threads, output)
    except BrokenPipeError:
        return NOBODY_READS
    except OSError as fault:
        _tell(f"the answer cannot be written: {fault.strerror or fault}")
        return FAULT


def _read_arguments(arguments: Sequence[str] | None) -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m workers.plan_file", description="Plan the request in one file.")
    parser.add_argument("file", metavar="FILE", help="a job as JSON; - for standard input")
    parser.add_argument("--threads", type=int, default=len(os.sched_getaffinity(0)), help="parts solved side by side")
    given = parser.parse_args(arguments)
    if given.threads < 1:
        parser.error("--threads: at least 1")
    return given


def _read_file(name: str) -> bytes:
    """Read one byte more than is allowed, so that the caller can tell a file that is too large."""
    most = MAX_FILE_MIB * 2**20 + 1
    if name != "-":
        with Path(name).open("rb") as file:
            return file.read(most)
    if sys.stdin is None:
        raise OSError("standard input is closed")
    return sys.stdin.buffer.read(most)


def _output_kept_for_the_answer() -> BinaryIO:
    """Return the real standard output, and let nothing else write to it from now on.

    HiGHS 1.16 prints a banner from native code when its first solver is made, whatever its options say; what it has to
    say about a model comes back as a status. There is no way back: native code may write what it held at the very end.
    """
    output, nowhere = os.dup(1), os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, 1)
    os.close(nowhere)
    return os.fdopen(output, "wb")


def _answer(body: bytes, threads: int, output: BinaryIO) -> int:
    """Plan in a thread of its own: this one is left to show progress and to hear an interrupt while a solver runs."""
    sign = ProgressSign(sys.stderr)
    with ThreadPoolExecutor(1, thread_name_prefix="plan") as pool:
        planned = pool.submit(_planned, body, threads, sign)
        while not wait([planned], _SECONDS_BETWEEN_SIGNS).done:
            sign.show()
    sign.clear()
    fault = planned.exception()
    if isinstance(fault, RefusedError):
        return _refuse(fault, output)
    if fault is not None:
        return _own_fault(fault, body)
    return _hand_over(planned.result(), output)


def _planned(body: bytes, threads: int, sign: "ProgressSign") -> Schedule | Diagnosis | Undecided:
    """Plan; numpy and the solvers are imported once all is set up for them, and there is something to plan."""
    sign.progress("reading", 0.0)
    job = read_job(read_json(body))
    sign.progress("loading the solvers", 0.0)
    # Read when numpy loads its linear algebra; parts are solved side by side, each would start threads of its own.
    os.environ.update(OPENBLAS_NUM_THREADS="1", OMP_NUM_THREADS="1")
    from workers.planning.plan import plan

    return plan(job, Limits.of(job, datetime.now(UTC), threads=threads), sign)


def _hand_over(answer: Schedule | Diagnosis | Undecided, output: BinaryIO) -> int:
    _write_document(answer, output)
    if not isinstance(answer, Schedule):
        _tell(f"{answer.outcome}: {answer.summary}")
    elif answer.verification.violations:
        _tell(f"{answer.outcome}: {len(answer.verification.violations)} violations, listed in the answer")
    return STATUS_OF[answer.outcome]


def _write_document(document: BaseModel, output: BinaryIO) -> None:
    """Write UTF-8 whatever the locale is, in lines where a person reads it."""
    text = document.model_dump_json(by_alias=True, indent=1 if output.isatty() else None)
    output.write(f"{text}\n".encode())
    output.flush()


def _refuse(refused: RefusedError, output: BinaryIO) -> int:
    _write_document(refused.problem(), output)
    for fault in refused.faults[:MAX_REPORTED_FAULTS]:
        _tell(f"{fault.pointer or '(whole document)'}: {fault.detail}")
    if (left := len(refused.faults) - MAX_REPORTED_FAULTS) > 0:
        _tell(f"and {left} faults more")
    return NOT_TAKEN


def _own_fault(fault: BaseException, body: bytes) -> int:
    """Show all there is: whoever runs this command is the one to report it."""
    traceback.print_exception(fault)
    for violation in getattr(fault, "violations", ()):
        _tell(f"evidence: {violation.pointer}: {violation.text}")
    named = hashlib.sha256(body).hexdigest()[:12]
    _tell(f"a fault of ours, not of the request: {type(fault).__name__} (request {named}); no schedule is given")
    return FAULT


def _tell(line: str) -> None:
    """Print one line for a person; what a caller wrote cannot break it up or steer the terminal."""
    if sys.stderr is None:  # closed by whoever started this; `print` would take standard output instead
        return
    shown = "".join(char if char.isprintable() else char.encode("unicode_escape").decode() for char in line)
    print(shown, file=sys.stderr)


def _stop(_number: int, _frame: FrameType | None) -> None:
    """End at once and without a word: a solver would not hear of an exception before it is done."""
    os._exit(INTERRUPTED)


class ProgressSign(Unwatched):
    """One line on a terminal that says how far a plan has come; nothing where no person looks on."""

    def __init__(self, stream: TextIO | None, clock: Callable[[], float] = time.monotonic) -> None:
        self._stream = stream if stream is not None and stream.isatty() else None
        self._clock = clock
        self._began = clock()
        self._stage = ("starting", 0.0)
        self._shown = ""

    def progress(self, phase: str, done: float) -> None:
        """Take note of a phase and the share of it that is done, from any thread."""
        self._stage = (phase, done)

    def show(self) -> None:
        """Write the line anew, once the work has taken a second."""
        passed = self._clock() - self._began
        if self._stream is None or passed < _SECONDS_WITHOUT_SIGN:
            return
        phase, done = self._stage
        line = f"{phase} {done:4.0%}, {passed:.0f} s"
        self._stream.write("\r" + line.ljust(len(self._shown)))
        self._stream.flush()
        self._shown = line

    def clear(self) -> None:
        """Take the line away."""
        if self._stream is not None and self._shown:
            self._stream.write("\r" + " " * len(self._shown) + "\r")
            self._stream.flush()


if __name__ == "__main__":
    sys.exit(main())
