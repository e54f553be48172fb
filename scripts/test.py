"""Check everything: ``python3 scripts/test.py [pytest args...]``.

Sets up the same environment as run.py with the test tools added, then runs pytest, ruff, mypy and
the import contract. Exits non-zero when any of them fails.
"""

import sys

# This file is kept readable by any Python, so that an old one gets a sentence, not a traceback.
if sys.version_info < (3, 11):
    sys.exit(
        "Tinemark needs Python 3.11 or newer, and this is Python %d.%d. "
        "Start it with a newer one, for example: python3.12 scripts/test.py" % sys.version_info[:2]
    )

from checks import check_everything

if __name__ == "__main__":
    sys.exit(check_everything(sys.argv[1:]))
