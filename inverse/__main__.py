"""``python -m inverse`` is the command line."""

from inverse.cli import main

if __name__ == "__main__":
    main()
