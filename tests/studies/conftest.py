"""The tasks of these tests can be imported by worker processes, wherever the tests are started."""

import os
import sys
from pathlib import Path

HERE = str(Path(__file__).parent)
ROOT = str(Path(__file__).parents[2])
sys.path.insert(0, HERE)
# processes of a cluster get it by their environment
os.environ["PYTHONPATH"] = os.pathsep.join([HERE, ROOT, *filter(None, [os.environ.get("PYTHONPATH")])])
