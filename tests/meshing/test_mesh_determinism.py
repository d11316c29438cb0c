"""The same domain gives the same bits: in one process, after other work, and in a fresh process."""

import hashlib
import subprocess
import sys
from pathlib import Path

import numpy as np
from meshing_shapes import SHAPES

from service.meshing.generate import mesh_domain
from service.meshing.mesh import Mesh

NAMES = ("comb", "tiny hole", "shoreline", "notch 359")


def digest(name: str) -> str:
    return fingerprint(mesh_domain(SHAPES[name], size=0.3, target=1e-5))


def fingerprint(mesh: Mesh) -> str:
    """A digest of all bits of a mesh."""
    arrays = (mesh.points, mesh.cells, mesh.spans, mesh.facets, mesh.cell_facets, mesh.part, mesh.regions)
    text = b"".join(np.ascontiguousarray(array).tobytes() for array in arrays)
    return hashlib.sha256(text + repr((mesh.unit, mesh.shape_error)).encode()).hexdigest()


def test_twice_in_one_process_and_once_in_another():
    first = [digest(name) for name in NAMES]
    again = [digest(name) for name in reversed(NAMES)][::-1]
    assert first == again
    assert len(set(first)) == len(NAMES)
    here = Path(__file__).parent
    code = (
        f"import sys; sys.path[:0] = [{str(here)!r}, {str(here.parents[1])!r}]; "
        f"from test_mesh_determinism import NAMES, digest; print(*map(digest, NAMES))"
    )
    fresh = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert fresh.stdout.split() == first
