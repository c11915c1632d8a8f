"""Fixed points and spectra of a Flow."""
