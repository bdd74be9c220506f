//! Sticks × shape ⊗ instrument → predicted trace. Knows no molecule.
