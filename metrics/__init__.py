"""Numbers from signals: calibration, beats, landmarks, indices; numpy and scipy only, nothing judged."""
