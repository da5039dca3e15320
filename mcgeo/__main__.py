"""``python -m mcgeo``."""

from mcgeo.cli import main

raise SystemExit(main())
