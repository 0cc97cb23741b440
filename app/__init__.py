"""The dashboard and the console command over ``evalcore``."""
