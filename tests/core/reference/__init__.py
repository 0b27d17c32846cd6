"""Independent evidence for the solver core: published figures and high-precision values."""
