"""Published cases, shipped with the package and computed on the machine it runs on."""
