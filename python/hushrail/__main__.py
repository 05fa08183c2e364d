"""``python -m hushrail`` is the command ``hushrail``."""

import sys

from hushrail.command import main

if __name__ == "__main__":
    sys.exit(main())
