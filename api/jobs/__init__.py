"""Solves in processes of their own: started, watched, ended, kept.

``processes`` what a child is started with and held to; ``messages`` the framing
on its pipe; ``worker`` what runs in it; ``forkserver`` where workers are forked
from; ``supervisor`` who watches them; ``store`` and ``queue`` the jobs.
"""
