"""The campaign: a plan of runs, who does them, and the store that keeps what came of them."""
