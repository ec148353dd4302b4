"""The report: one document made of blocks, from the results that everything else shows, and a writer for each form."""
