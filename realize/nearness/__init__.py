"""How near a model is to one with a hidden mode, proved from both sides."""
