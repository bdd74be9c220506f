//! Area-normalised line shapes with their derivatives.
