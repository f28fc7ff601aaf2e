"""Ready circuits and property files: the clockless control board of a solar-powered river gauge."""
