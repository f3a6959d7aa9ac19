"""Where the files of published facts are, and which they are."""

from pathlib import Path

HERE = Path(__file__).parent
FACTS = ("verdicts", "own_verdicts", "first_integrals", "complete_integrals", "motions")
