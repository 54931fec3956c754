"""Lets `python -m lfptools` do what the command does."""

import sys

from lfptools.cli import main

sys.exit(main())
