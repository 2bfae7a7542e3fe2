"""``python -m pairmc`` is the command line."""

from pairmc.cli.main import main

if __name__ == "__main__":
    main()
