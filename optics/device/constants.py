"""Constants that more than one module of this storey needs; each stands here once."""

# Product of the Planck constant and the speed of light, eV nm; exact in the SI, rounded to 1e-6.
HC_EV_NM = 1239.841984
