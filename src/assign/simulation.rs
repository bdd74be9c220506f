//! Whether a probability of p is right with frequency p, on spectra drawn from the model.
