"""The real service around odd workers: ``python odd_service.py PORT``."""

import os
import sys

from api.__main__ import serve
from api.app import create_app
from api.settings import read_settings

if __name__ == "__main__":
    app = create_app(read_settings(os.environ), worker_module="odd_worker")
    sys.exit(serve(app, "127.0.0.1", int(sys.argv[1])))
