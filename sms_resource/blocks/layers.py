"""Domains stacked below the seafloor."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid

Array = NDArray[Any]


@dataclass(frozen=True, eq=False)
class LayeredDomains:
    """Domains stacked below the seafloor, from the top down.

    Parameters
    ----------
    names : tuple of str
        From the top down; at least one.
    contacts : tuple of SurfaceGrid
        Depth below the seafloor in m of the contact under each domain but the last. A contact that is
        shallower than the one above it leaves its domain without thickness there.
    """

    names: tuple[str, ...]
    contacts: tuple[SurfaceGrid, ...] = ()

    def __post_init__(self) -> None:
        if not self.names or len(set(self.names)) != len(self.names):
            raise ValueError(f"names must be different domains, at least one, not {self.names!r}")
        if len(self.contacts) != len(self.names) - 1:
            raise ValueError(
                f"contacts must hold one surface less than names: {len(self.names) - 1}, not {len(self.contacts)}"
            )

    def depths(self, lattice: SurfaceGrid) -> Array:
        """Depths in m on the nodes of a lattice (domains - 1, ny, nx); nothing is taken as zero depth."""
        x, y = lattice.mesh()
        depths: Sequence[Array] = [
            contact.values
            if (contact.x0, contact.y0, contact.dx, contact.dy, contact.shape)
            == (lattice.x0, lattice.y0, lattice.dx, lattice.dy, lattice.shape)
            else contact.sample(x, y)
            for contact in self.contacts
        ]
        if not depths:
            return np.zeros((0, *lattice.shape))
        return np.maximum(np.nan_to_num(np.stack(depths)), 0.0)
