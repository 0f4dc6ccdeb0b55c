"""The docks, in the order of the work: Stack, Field, Phase, Singularities, Motion, Review."""
