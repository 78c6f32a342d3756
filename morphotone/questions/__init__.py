"""What a scientist asks of a cell or a data set, answered as tables."""
