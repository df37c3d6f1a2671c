"""Result sheets as values: what a solved, faulty or impossible workbook comes back with."""
