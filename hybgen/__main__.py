"""python -m hybgen"""

import sys

from hybgen.cli.main import main

sys.exit(main())
