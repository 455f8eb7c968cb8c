"""hubokit: reduce k-local Hamiltonians to quadratic form, and prove that their ground states survive."""

from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian, booleans, spins

__all__ = ["Hamiltonian", "HubokitError", "InputError", "LimitError", "booleans", "spins"]
