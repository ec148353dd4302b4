"""From flows to F and V: symbols and templates, no numbers of a particular scenario."""
