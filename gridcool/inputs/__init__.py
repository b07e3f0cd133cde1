"""Inputs: paths of gridded files become one checked dataset on the target grid."""
