"""The part of a pump that belongs to one eigenvalue of a conserved quantity, such as one spin.

If a Hermitian matrix Q_x on the orbitals of every site commutes with the Hamiltonian of the device and of its leads,
electrons never change its eigenvalue q, and r is block diagonal.  With U_q the eigenvectors of q on every site, the
blocks of H are U_q^+ H U_q: a pump in its own right, with modes, r and winding of its own.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError, told
from scatterpump.pump import Pump
from scatterpump.solver.hamiltonian import driven_path
from scatterpump.solver.path import description

__all__ = ["eigenvalues", "law_of_leads", "require_conserved", "sector"]

Complex = NDArray[np.complex128]
Law = Any  # a matrix, a mapping from site families to matrices, or a function of a site: as kwant takes it
CONSERVED = 1e-10  # of |Q| |H|: rounding of values written with all their digits
SAME = 1e-9
SAMPLES = 24
ALLOWED = "a Hermitian matrix on the orbitals, a mapping from site families to such, or a function of a site"


def law_of_leads(pump: Pump) -> Law | None:
    """Return the conservation law that the probe was built with; None without one, or if finalizing has hidden it."""
    builder = getattr(pump.system.leads[pump.probe], "builder", None)
    return getattr(builder, "conservation_law", None)


def eigenvalues(pump: Pump, law: Law) -> tuple[float, ...]:
    """Return the different eigenvalues of a law on the probe's sites, ascending."""
    lead = pump.finalized.leads[pump.probe]
    _require_sites(lead)
    found = np.sort(np.concatenate([_eigen(law, site)[0] for site in lead.sites]))
    return tuple(found[np.concatenate([[True], np.diff(found) > SAME])].tolist())


def require_conserved(pump: Pump, law: Law) -> None:
    """Make sure that the device and its leads conserve a quantity, all along the cycle.

    Raises
    ------
    InputError
        If one does not: it says which, and by how much.
    """
    from scipy.sparse import coo_matrix

    system = pump.finalized
    for number, lead in enumerate(system.leads):
        _require_sites(lead)
        parameters = pump.parameters(0.0)
        cell, hop = lead.cell_hamiltonian(params=parameters), lead.inter_cell_hopping(params=parameters)
        inside = _operator(law, lead.sites[: lead.cell_size])
        _require_commuting(inside, cell, inside, f"lead {number}")
        _require_commuting(inside, hop, inside[: hop.shape[1], : hop.shape[1]], f"lead {number}")
    driven, path = driven_path(pump)
    known = description(path, SAMPLES)
    assert known is not None  # samples are asked for
    whole = _operator(law, system.sites)
    for entries in known:
        matrix = coo_matrix((entries, (driven.rows, driven.columns)), shape=2 * (driven.size,)).tocsr()
        _require_commuting(whole, matrix, whole, "the device")


def sector(pump: Pump, law: Law, eigenvalue: float) -> Pump:
    """Return the part of `pump` that belongs to one eigenvalue of a conserved quantity.

    Raises
    ------
    InputError
        If some site has no state of that eigenvalue.
    """
    part = _projected(pump.finalized, law, eigenvalue)
    return replace(pump, system=part, bulk=None, name=f"{pump.name}, eigenvalue {eigenvalue:g}")


def _require_sites(lead: Any) -> None:
    if not hasattr(lead, "sites"):
        raise InputError("a lead is given by its modes alone, which hides its orbitals", allowed="leads with sites")


def _law_on(law: Law, site: Any) -> Complex:
    """Q on the orbitals of a site."""
    try:
        value = law(site) if callable(law) else law[site.family] if isinstance(law, Mapping) else law
        found = np.atleast_2d(np.array(value, dtype=complex))
    except Exception as cause:  # a mapping may lack a family, and a user's function may raise anything
        raise InputError(f"the conservation law fails on {site}: {told(cause)}", allowed=ALLOWED) from cause
    if found.shape != 2 * (site.family.norbs,) or not np.allclose(found, found.conj().T, rtol=0, atol=SAME):
        raise InputError(f"the conservation law does not fit the orbitals of {site}", allowed=ALLOWED)
    return found


def _eigen(law: Law, site: Any) -> tuple[NDArray[np.float64], Complex]:
    values, vectors = np.linalg.eigh(_law_on(law, site))
    return values, vectors


def _operator(law: Law, sites: Any) -> Any:
    from scipy.sparse import block_diag

    return block_diag([_law_on(law, site) for site in sites], format="csr")


def _require_commuting(left: Any, matrix: Any, right: Any, where: str) -> None:
    off, size = abs(left @ matrix - matrix @ right).max(), abs(matrix).max() * abs(left).max()
    if off > CONSERVED * size:
        raise InputError(
            f"{where} does not conserve the quantity: it mixes its eigenvalues with an amplitude of {off:.1e}",
            allowed="a quantity that commutes with the Hamiltonian of the device and all leads",
        )


def _projected(system: Any, law: Law, eigenvalue: float) -> Any:
    """The system in the basis of one eigenvalue, as a kwant system of its own."""
    import kwant

    class Part:
        """A finalized kwant system between bases on its sites."""

        def __init__(self, whole: Any) -> None:
            bases = [_basis(law, site, eigenvalue) for site in whole.sites]
            self.whole, self.bases = whole, bases
            self.graph, self.sites, self.parameters = whole.graph, whole.sites, whole.parameters
            self.site_ranges = None

        def hamiltonian(self, i: int, j: int, *args: Any, params: Any = None) -> Complex:
            value = np.atleast_2d(np.asarray(self.whole.hamiltonian(i, j, *args, params=params)))
            return np.asarray(self.bases[i].conj().T @ value @ self.bases[j])

    class InfinitePart(Part, kwant.system.InfiniteSystem):  # type: ignore[misc]  # kwant has no annotations
        """A lead."""

        def __init__(self, whole: Any) -> None:
            super().__init__(whole)
            self.cell_size = whole.cell_size

    class FinitePart(Part, kwant.system.FiniteSystem):  # type: ignore[misc]  # kwant has no annotations
        """A device with leads."""

        def __init__(self, whole: Any) -> None:
            super().__init__(whole)
            self.leads, self.lead_interfaces = [InfinitePart(lead) for lead in whole.leads], whole.lead_interfaces
            self.lead_paddings = whole.lead_paddings
            self.onsites = [_between(value, self.bases[i], self.bases[i]) for i, value in enumerate(whole.onsites)]
            edges = zip(whole.graph, whole.hoppings, strict=True)
            self.hoppings = [_between(value, self.bases[i], self.bases[j]) for (i, j), value in edges]

    return FinitePart(system)


def _basis(law: Law, site: Any, eigenvalue: float) -> Complex:
    """U_q on a site: its columns are the states of `eigenvalue`."""
    values, vectors = _eigen(law, site)
    chosen = np.abs(values - eigenvalue) <= SAME
    if not chosen.any():
        raise InputError(f"{site} has no state of eigenvalue {eigenvalue:g}", allowed="a law with one on every site")
    return vectors[:, chosen]


def _between(pair: tuple[Any, Any], left: Complex, right: Complex) -> tuple[Any, Any]:
    """A value of kwant's with the names of its parameters, taken between two bases."""
    from kwant.builder import Other

    value, names = pair
    if value is Other:
        return pair
    if names is None:
        return _turned(value, left, right), None
    function: Callable[..., Any] = value
    return (lambda *arguments: _turned(function(*arguments), left, right)), names


def _turned(value: Any, left: Complex, right: Complex) -> Complex:
    """U^+ value V, for a matrix or each of a stack."""
    matrix = np.asarray(value)
    return np.asarray(left.conj().T @ (matrix if matrix.ndim > 1 else np.atleast_2d(matrix)) @ right)
