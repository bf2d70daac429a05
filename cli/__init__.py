"""The command ``reweight``: parses, calls public names, prints.  No computation."""

import signal
import sys

__all__ = ["main"]


def main() -> None:
    """Run the installed command; Ctrl-C ends it without a traceback, from the first import to the last moment."""
    try:
        from reweight.cli.application import main as run

        run()
    except KeyboardInterrupt:
        sys.stderr.write("reweight: interrupted\n")
        sys.exit(130)
    finally:
        signal.signal(signal.SIGINT, signal.SIG_IGN)  # all is done but for the interpreter's own end
