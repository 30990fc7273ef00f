"""The commands, and what a person hears of them."""
