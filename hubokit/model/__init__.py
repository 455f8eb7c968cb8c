"""What a Hamiltonian is: exact coefficients, columns of terms, states and the trail of steps."""
