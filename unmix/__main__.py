"""``python -m unmix`` is the command ``unmix``."""

from unmix.cli import main

if __name__ == "__main__":
    main()
