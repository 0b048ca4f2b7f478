"""`python -m windage` is the command line."""

import sys

from ._command_line import main

sys.exit(main())
