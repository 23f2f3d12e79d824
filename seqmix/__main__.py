"""`python -m seqmix`: the same as `seqmix`."""

import sys

from seqmix.cli.run import main

if __name__ == "__main__":
    sys.exit(main())
