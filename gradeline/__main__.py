"""``python -m gradeline``."""

from gradeline.cli import main

if __name__ == "__main__":
    main()
