"""``python -m safecheck``."""

from safecheck.cli import main

if __name__ == "__main__":
    main()
