"""Pairing of very many nodes and slots: a tree over the slots, auction, augmenting paths, bottleneck."""
