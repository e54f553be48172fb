"""Start Tinemark from the checkout: ``python3 scripts/run.py [args...]`` runs ``tinemark [args...]``.

The first start makes ``.venv`` beside the sources and installs what scripts/requirements.txt pins.
"""

import sys

# This file is kept readable by any Python, so that an old one gets a sentence, not a traceback.
if sys.version_info < (3, 11):
    sys.exit(
        "Tinemark needs Python 3.11 or newer, and this is Python %d.%d. "
        "Start it with a newer one, for example: python3.12 scripts/run.py" % sys.version_info[:2]
    )

from environment import start

if __name__ == "__main__":
    start(sys.argv[1:])
