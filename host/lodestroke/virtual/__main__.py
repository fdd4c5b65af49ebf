"""`python -m lodestroke.virtual CONFIG`: the process of a virtual board; see serve.py."""

import json
import sys

from .serve import main

try:
    main(sys.argv[1])
except Exception as problem:
    # The launcher words it for the user; a traceback would only be in the way.
    as_json = getattr(problem, "as_json", None)
    parts = as_json() if as_json else {"what": repr(problem)}
    print(json.dumps({"failed": parts}), flush=True)
    sys.exit(1)
