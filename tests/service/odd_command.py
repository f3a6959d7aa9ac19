"""``api.solve_file`` around odd solves."""

import sys

from odd_worker import odd_solve

from api.jobs import worker
from api.solve_file import main

if __name__ == "__main__":
    worker.solve = odd_solve
    sys.exit(main(sys.argv[1:]))
