//! Resolves what the user asked for and runs it.
