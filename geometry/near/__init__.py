"""How near the other side comes to every place of a surface."""
