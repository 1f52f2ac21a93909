"""The parts of the full lane: requests, accuracy, shared arcs, arcs of one's own, nodes followed one by one."""
