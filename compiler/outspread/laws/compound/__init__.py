"""Laws made from other laws, formulas or data: truncation, mixture, density, table, histogram, sample."""
