"""``python -m hubokit.cli`` runs the command line where the console script is not installed."""

from hubokit.cli import main

if __name__ == "__main__":
    main()
