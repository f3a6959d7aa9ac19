"""In which coordinate systems does a Cartesian Hamiltonian separate?"""
