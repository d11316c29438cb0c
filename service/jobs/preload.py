"""Imported once by the fork server, so that every child has these modules loaded when it starts."""

import gc
import importlib
import os
import traceback

from service.jobs import registry

HEAVY = ("numpy", "scipy.sparse.linalg", "skfem", "shapely", "gmsh")

try:
    for module in HEAVY:
        importlib.import_module(module)
    registry.processes(os.environ[registry.VARIABLE])
    registry.warm(os.environ[registry.VARIABLE])
except Exception:
    # The fork server must live; a child meets the same error and reports it with its job.
    traceback.print_exc()

# Collections in a child would touch, and so copy, the pages it shares with the fork server.
gc.collect()
gc.freeze()
