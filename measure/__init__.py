"""Calibrated ECG leads in; beats, boundaries, wave shapes and published criteria out."""
