"""`python -m lodestroke.virtual CONFIG`: the process of a virtual board; see serve.py."""

import json
import sys

from .serve import main

try:
    main(sys.argv[1])
except Exception as problem:
    # The launcher words it for the user; a traceback would only be in the way.
    parts = getattr(problem, "as_json", lambda: {"what": repr(problem)})()
    print(json.dumps({"failed": parts}), flush=True)
    sys.exit(1)
