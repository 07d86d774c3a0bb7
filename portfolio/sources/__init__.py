"""One module per kind of source; each turns an item into the staging table that the intake works on."""
