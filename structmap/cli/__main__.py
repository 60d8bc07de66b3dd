"""Lets ``python -m structmap.cli`` stand for ``structmap``."""

import sys

from structmap.cli.entry import main

sys.exit(main())
