//! Figures, tables and pages, drawn from the dossier; nothing is computed while drawing.
