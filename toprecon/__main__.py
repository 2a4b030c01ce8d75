"""``python -m toprecon`` is the ``toprecon`` command."""

from __future__ import annotations

import sys

from toprecon.cli.entry import main

if __name__ == "__main__":
    sys.exit(main())
