"""Wave speed, Poisson's ratio and gauge positions of elastic bars, from the phases of passages."""
