"""Durable jobs: the records, the engines that work them off, and the sweeps made of many points."""
