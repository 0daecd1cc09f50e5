"""``python -m calibrate``: the command line."""

from calibrate.cli import main

if __name__ == "__main__":
    main()
