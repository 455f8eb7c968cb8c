"""The command line."""

from __future__ import annotations


def main() -> None:
    """Run the program on the arguments of the process and leave with its exit code."""
    import _thread
    import os
    import sys
    import threading

    from hubokit.cli.app import run

    if sys.stdout is None:
        # The caller has closed it.
        sys.stdout = os.fdopen(os.open(os.devnull, os.O_WRONLY), "w", encoding="utf-8")
    unraisable = sys.unraisablehook

    def passed_on(what: sys.UnraisableHookArgs) -> None:
        """Ctrl-C in a place that cannot raise, such as the compiler's callbacks, is neither lost nor a traceback."""
        if what.exc_type is KeyboardInterrupt:
            # A moment later, since the hook cannot raise either.
            again = threading.Timer(0.05, _thread.interrupt_main)
            again.daemon = True
            again.start()
        else:
            unraisable(what)

    sys.unraisablehook = passed_on
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="backslashreplace")
    sys.exit(run(sys.argv[1:]))
