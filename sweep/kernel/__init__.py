"""The numerics: a compiled stiff integrator over many batches at once. Knows arrays only."""


def needs_compiling() -> bool:
    """Tell whether the next march will first compile the kernel (once per installation)."""
    from sweep.kernel.cache import is_empty

    return is_empty()
