"""From measured intensities to amplitudes on an absolute scale."""
