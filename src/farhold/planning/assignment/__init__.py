"""Who flies where: the pairing of nodes and slots that is best for an objective, with its proof."""
