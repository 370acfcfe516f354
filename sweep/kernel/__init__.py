"""The numerics: a compiled stiff integrator over many batches at once. Knows arrays only."""


def needs_compiling() -> bool:
    """Tell whether the next march will first compile the kernel (once per installation)."""
    from sweep.kernel import cache
    from sweep.kernel.code import MARCH

    return cache.read(MARCH) is None
