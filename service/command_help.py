"""What the command line says of itself when asked for help."""

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
Show the main job from end to end: start a service of its own on this machine, send it over HTTP the day of an invented
co-operative of batteries and print the schedule for a person to read; then the same day after a trip that no schedule
can meet, and why. What the service answered, as JSON and CSV, is left in a folder. Everything that was started is
stopped again. It takes some ten seconds.

exit status:
  0    the first day has a schedule in which everything holds, and the second is proven impossible
  1    something did not hold; it is named
  2    it could not begin: there is no place for the answers
"""

OPEN_ON_LOOPBACK_ONLY = (
    "this version has no API keys yet: anyone who can reach the port can use the service, so it runs with --no-auth, "
    "on a loopback address, and not otherwise"
)

UP_HELP = f"""\
Run everything on one machine until told to stop: a Redis of its own (files in DIR, an append-only file, a socket only
this user can reach, no port), the API, a keeper, workers, and one more worker for urgent jobs. What was accepted is
kept in DIR and goes on at the next start; a job that is being planned at a stop has a few seconds to end, and
is otherwise planned anew.

{OPEN_ON_LOOPBACK_ONLY[0].upper()}{OPEN_ON_LOOPBACK_ONLY[1:]}.

exit status:
  0    stopped by SIGTERM or SIGINT
  1    Redis or one of the processes would not start; standard error says which and why
  2    cannot run as asked: DIR or the port is in use, no redis-server was found, or others could reach the port
"""

OPEN_TO_ALL = """\
This version has no API keys yet: whoever reaches the port can use the service. Let it listen where only those can who
may, or put a proxy before it that asks who calls; NO_AUTH says that this is so, and without it the API does not start.
"""

_BY_ENVIRONMENT = """\
Settings come from the environment, HOURWRIGHT_<NAME>, and what looks like a setting but is none is refused:
"""
_OF_ALL = """\
  REDIS_URL               where Redis is (redis://127.0.0.1:6379/0)
  REDIS_PASSWORD_FILE     file that holds its password (none)
  KEY_PREFIX              what all keys begin with, one word for each deployment on one Redis (hourwright)
"""

SERVE_HELP = f"""\
Run the API and nothing else, as in a container; Redis may come later, and go and come back.

{OPEN_TO_ALL}\

{_BY_ENVIRONMENT}{_OF_ALL}\
  HOST, PORT              where to listen (127.0.0.1, 8080)
  NO_AUTH                 true: nobody reaches the port who may not use the service (false, which does not start)
  ALLOWED_HOSTS           names by which it may be called, between commas (any)
  TRUSTED_PROXY           address of the proxy whose word on a caller's address counts (none)
  HTTP_THREADS            requests at a time (64)
  DRAIN_SECONDS           what requests under way may still take at a stop (30)
  RETENTION_DAYS          how long an ended job is kept (7)
  IDEMPOTENCY_HOURS       how long a key for repeated submissions is remembered (24)
  LONGEST_QUEUE           jobs that may wait; one more is answered 503 (10000)
  MEMORY_SHARE            share of Redis's memory above which 503 is answered (0.7)
  REVISIONS_KEPT          revisions kept of a fleet or a window (1000)

exit status:
  0    stopped by SIGTERM or SIGINT, requests under way answered
  1    cannot listen
  2    a setting is wrong; it is named
"""

WORK_HELP = f"""\
Run one worker, which plans one job at a time; any number may run on one Redis. Urgent jobs have a queue of their own
and need a worker of their own.

{_BY_ENVIRONMENT}{_OF_ALL}\
  QUEUE                   jobs or urgent (jobs)
  THREADS                 independent parts of one job solved side by side (1)
  GRACE_SECONDS           what a running job may still take at a stop (10); then it goes back to its queue
"""

KEEP_HELP = f"""\
Run the keeper: it returns the jobs of workers that died to their queue and takes away what has expired. A second one
stands by.

{_BY_ENVIRONMENT}{_OF_ALL}"""
