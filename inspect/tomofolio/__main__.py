"""``python -m tomofolio`` is the same as the command ``tomofolio``."""

from tomofolio.cli import main

raise SystemExit(main())
