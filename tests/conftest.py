"""What all tests share: no display, one compute thread."""

import os

os.environ.setdefault("MPLBACKEND", "Agg")
