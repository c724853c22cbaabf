"""Does one whole run in a process of its own, which tests can kill: dossier, seconds per frame, log of frames."""

import sys
from pathlib import Path

from tests.runner.studies import FakeEvaluation, run_study, study

if __name__ == "__main__":
    dossier, takes_s, log = sys.argv[1:]
    run_study(Path(dossier), study(), evaluation=FakeEvaluation(takes_s=float(takes_s), log=log))
