"""``python -m fieldgen``."""

from fieldgen.cli import main

if __name__ == "__main__":
    raise SystemExit(main())
