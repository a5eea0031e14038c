"""``python -m bayeslca``: the command line."""

from bayeslca.cli import main

if __name__ == "__main__":
    main()
