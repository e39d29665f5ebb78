"""Virtual thermometers: exact samples of temperature and velocity at chosen places."""
