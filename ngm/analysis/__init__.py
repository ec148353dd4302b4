"""One module a verb: a scenario in, one labelled result out."""
