"""Many items, unattended: discovery, ledger, workers, clock; knows no science."""
