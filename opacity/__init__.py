"""Cross-section tables for model atmospheres from molecular line lists, with the proof inside."""
