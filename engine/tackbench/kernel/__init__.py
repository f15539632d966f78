"""The kernel: steps a circuit through time from its coefficient sets and its devices' laws."""
