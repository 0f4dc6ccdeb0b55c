"""Phase of one field: residues, unwrapping with its cuts, smooth and singular parts."""
