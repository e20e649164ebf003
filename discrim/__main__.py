"""``python -m discrim``."""

import sys

from discrim.cli import main

if __name__ == "__main__":
    sys.exit(main())
