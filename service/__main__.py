"""Run the command line: `python -m service`, which is what the `hourwright` script starts."""

import sys

from service.command_line import main

if __name__ == "__main__":
    sys.exit(main())
