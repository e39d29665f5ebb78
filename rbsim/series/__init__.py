"""Numbers about records: averages with errors, spectra, distributions, agreement tests."""
