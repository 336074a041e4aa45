"""From a site's records to the posterior of the slowness vector through time."""
