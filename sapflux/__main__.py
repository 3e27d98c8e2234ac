"""`python -m sapflux`: the same command line as `sapflux`."""

import sys

from sapflux.cli import main

sys.exit(main())
