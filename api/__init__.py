"""The HTTP service and the commands around ``hjsolve``."""
