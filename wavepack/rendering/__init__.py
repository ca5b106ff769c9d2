"""Pictures of a run: movies, overviews, spectra. The renderer never propagates."""
