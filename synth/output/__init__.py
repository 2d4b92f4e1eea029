"""What a person reads: bill, report and plots, one output a file; everything here only renders."""
