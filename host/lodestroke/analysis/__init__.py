"""Results with uncertainties, from logbook rows. Pure functions: nothing here opens anything."""
