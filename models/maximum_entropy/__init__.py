"""Maximum-entropy models: the least committal laws that match chosen totals of the network."""
