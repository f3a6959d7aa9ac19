"""The command ``hjsolve``: reads its arguments, and becomes the program that does the work.

Nothing is loaded here, so that ``hjsolve solve`` need not wait for a web server's modules nor
``hjsolve serve`` for a second loading of SymPy; and the program that does the work starts in
the environment of every solve, a fixed hash seed among it.
"""

from __future__ import annotations

import argparse
import os
import sys
from typing import NoReturn

from api.jobs.processes import child_environment, module_arguments


def main() -> NoReturn:
    """Run the command with the arguments of this process.

    The exit status is 0 when there is a verdict, 2 for bad input, 1 for anything else.
    """
    options = _parser().parse_args()
    if options.command == "serve":
        arguments = ["--host", options.host, "--port", str(options.port)]
        arguments = module_arguments("api", *arguments)
    else:
        arguments = [f"--{options.form}", "--deadline", str(options.deadline)]
        arguments += ["--task", options.command]
        arguments = module_arguments("api.solve_file", *arguments, "--", options.file)
    os.execve(sys.executable, arguments, child_environment())


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="hjsolve", description="Separation of Hamilton–Jacobi equations."
    )
    commands = parser.add_subparsers(dest="command", required=True)
    serve = commands.add_parser("serve", help="run the HTTP service")
    serve.add_argument("--host", default="127.0.0.1")
    serve.add_argument("--port", type=int, default=8000)
    solve = commands.add_parser("solve", help="solve the problem of a file")
    solve.add_argument("file", metavar="FILE", help="JSON or TOML; - for standard input")
    solve.add_argument("--deadline", type=float, default=60.0, metavar="SECONDS")
    solve.set_defaults(form="text")
    form = solve.add_mutually_exclusive_group()
    form.add_argument("--json", dest="form", action="store_const", const="json")
    form.add_argument("--latex", dest="form", action="store_const", const="latex")
    transform = commands.add_parser("transform", help="transform canonically as a file says")
    transform.add_argument("file", metavar="FILE", help="JSON or TOML; - for standard input")
    transform.add_argument("--deadline", type=float, default=30.0, metavar="SECONDS")
    transform.add_argument(
        "--json", dest="form", action="store_const", const="json", default="text"
    )
    return parser


if __name__ == "__main__":
    main()
