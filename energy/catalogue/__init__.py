"""Published equations, factors and limits as data: one file per publication."""
