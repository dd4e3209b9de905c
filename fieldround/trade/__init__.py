"""What each trade asks of the figures: class tables, circumferences, tube sizes, volumes."""
