"""The Allan deviation: estimator, the plain twin that judges it, intervals given a model."""
