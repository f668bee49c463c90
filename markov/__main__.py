"""The start of the program by `python -m markov`."""

import sys

from markov.cli import main

if __name__ == "__main__":
    sys.exit(main())
