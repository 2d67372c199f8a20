"""`python -m recon.cli` does what `fewcount` does."""

import sys

from recon.cli import main

if __name__ == "__main__":
    sys.exit(main())
