"""From pulses at the faces to the specimen: forces, velocities, stress, strain, rate, equilibrium."""
