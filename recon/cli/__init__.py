"""The command line, and the only place that prints.

Nothing but argparse is imported here, so that `fewcount --help` comes at once; each command imports what
it needs when it runs.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from importlib import import_module
from io import TextIOWrapper

from recon.cli.arguments import parser
from recon.errors import InputError

FAILED, BAD_INPUT, INTERRUPTED = 1, 2, 130


def main(argv: Sequence[str] | None = None) -> int:
    """Run a command and return its exit code: 0 done, 1 the job failed, 2 bad usage or bad input.

    argv: the words after `fewcount`; those the process was started with if left out.
    """
    if isinstance(sys.stdout, TextIOWrapper):  # a file name may hold what the terminal cannot show
        sys.stdout.reconfigure(errors="backslashreplace")
    try:
        options = parser().parse_args(argv)
        return import_module(options.module).run(options)
    except SystemExit as ended:  # argparse has printed the help or the version
        return int(ended.code or 0)
    except KeyboardInterrupt:
        return _complain("stopped from the keyboard; no file is half written.", INTERRUPTED)
    except InputError as error:
        return _complain(error, BAD_INPUT)
    except ValueError as error:
        from priors import PriorError

        if not isinstance(error, PriorError):
            raise
        return _complain(error, BAD_INPUT)
    except MemoryError:
        return _complain("there is not enough memory; give a smaller acquisition.", FAILED)
    except BrokenPipeError:
        sys.stdout = None  # whoever read it has gone; the interpreter would flush it once more
        return FAILED
    except OSError as error:
        where = f" {error.filename}" if error.filename else ""
        reason = error.strerror or error
        return _complain(f"cannot write{where}: {reason}; make room, or give another --out.", FAILED)


def _complain(sentence: object, code: int) -> int:
    print("fewcount:", " ".join(str(sentence).split()), file=sys.stderr)
    return code
