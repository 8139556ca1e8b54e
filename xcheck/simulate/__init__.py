"""ngspice in a worker process: the deck with cuts, run and measured."""
