"""`python -m planner`."""

import sys

try:
    from planner.cli import main

    sys.exit(main())
except KeyboardInterrupt:  # while the first modules were still loading
    sys.exit(130)
