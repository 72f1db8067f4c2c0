"""``python -m metro``: the same program as ``midfringe``."""

from metro.commandline import main

if __name__ == "__main__":
    main()
