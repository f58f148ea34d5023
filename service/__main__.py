"""`python -m service`: see `service.command_line`."""

import sys

from service.command_line import main

sys.exit(main())
