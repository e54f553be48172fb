"""``python -m tinemark``."""

import sys

from tinemark.cli import main

# A spawned worker imports this module under another name.
if __name__ == "__main__":
    sys.exit(main())
