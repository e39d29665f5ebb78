"""`python -m rbsim` is the command line."""

import sys

from rbsim.commands.entry import main

if __name__ == "__main__":
    sys.exit(main())
