"""``python -m purity``."""

from purity.cli import main

if __name__ == "__main__":
    main()
