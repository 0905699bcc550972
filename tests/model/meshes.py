"""Small meshes: distorted ones for the patch test, and a quarter of a thick-walled cylinder."""

from dataclasses import replace

import numpy as np

from tests.model.model import skfem

GRID = np.linspace(0.0, 1.0, 4)


def _distorted(mesh):
    """Every node moved by up to a fifth of an element."""
    moved = np.random.default_rng(7).uniform(-0.2, 0.2, mesh.doflocs.shape) * (GRID[1] - GRID[0])
    return replace(mesh, doflocs=mesh.doflocs + moved)


def _curved():
    mesh = skfem.MeshQuad2.from_mesh(skfem.MeshQuad.init_tensor(GRID, GRID))
    return replace(mesh, doflocs=mesh.doflocs + 0.03 * np.sin(3.0 * mesh.doflocs[::-1] + 1.0))


# Gauss points: two or three in each direction, which integrate the gradient of a shape function times the Jacobian exactly.
PATCHES = {
    "hexahedra": lambda: _basis(_distorted(skfem.MeshHex.init_tensor(GRID, GRID, GRID)), skfem.ElementHex1(), 3),
    "quadrilaterals": lambda: _basis(_distorted(skfem.MeshQuad.init_tensor(GRID, GRID)), skfem.ElementQuad1(), 3),
    "curved quadrilaterals": lambda: _basis(_curved(), skfem.ElementQuad2(), 5),
}


def _basis(mesh, element, order):
    basis = skfem.CellBasis(mesh, skfem.ElementVector(element), intorder=order)
    assert (basis.dx > 0.0).all()
    return basis


def quarter(inner, outer, across, around):
    """A quarter of a ring of 9-node quadrilaterals: its basis, and the facets of its sides by name."""
    square = skfem.MeshQuad.init_tensor(np.linspace(0.0, 1.0, across + 1), np.linspace(0.0, 1.0, around + 1))
    sides = {
        name: square.facets_satisfying(lambda x, row=row, value=value: np.isclose(x[row], value), boundaries_only=True)
        for name, row, value in (("bore", 0, 0.0), ("outside", 0, 1.0), ("y = 0", 1, 0.0), ("x = 0", 1, 1.0))
    }
    mesh = skfem.MeshQuad2.from_mesh(square)
    r, angle = inner + (outer - inner) * mesh.doflocs[0], 0.5 * np.pi * mesh.doflocs[1]
    return _basis(
        replace(mesh, doflocs=np.array([r * np.cos(angle), r * np.sin(angle)])), skfem.ElementQuad2(), 5
    ), sides


def radius(inner, outer, across):
    """A radius of line elements with three nodes and two Gauss points: its basis, and the points at its sides by name."""
    mesh = skfem.MeshLine(np.linspace(inner, outer, across + 1))
    sides = {
        "bore": mesh.facets_satisfying(lambda x: x[0] == inner),
        "outside": mesh.facets_satisfying(lambda x: x[0] == outer),
    }
    return _basis(mesh, skfem.ElementLineP2(), 3), sides
