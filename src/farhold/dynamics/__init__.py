"""Motion near the libration points: models, frames, references and the propagation of nodes about them."""
