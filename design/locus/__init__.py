"""The root locus with the exact dead time: condition, crossings, roots, branches, special points."""
