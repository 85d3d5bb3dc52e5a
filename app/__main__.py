"""``python -m app``: the console command without an installation."""

import sys

from .main import main

if __name__ == "__main__":  # worker processes import this module too
    sys.exit(main())
