"""``python -m safecheck``."""

import sys

try:
    from safecheck.cli import main
except KeyboardInterrupt:
    # Ctrl-C while modules load: nothing was begun, and no trace is shown.
    sys.exit(5)

if __name__ == "__main__":
    main()
