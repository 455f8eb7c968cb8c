"""The command line."""


def main() -> None:
    """Run the program on the arguments of the process and leave with its exit code."""
    import sys

    from hubokit.cli.app import run

    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="backslashreplace")
    sys.exit(run(sys.argv[1:]))
