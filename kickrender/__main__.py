"""`python -m kickrender`."""

import sys

from kickrender.cli.main import main

if __name__ == "__main__":
    sys.exit(main())
