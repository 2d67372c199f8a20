"""Solvers: primal-dual (the default), conic (the reference), majorise-minimise."""

from recon.solvers.contract import Solver, State, Unsuitable
from recon.solvers.run import solve

__all__ = ["Solver", "State", "Unsuitable", "solve"]
