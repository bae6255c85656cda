"""The face: scenario files, questions, maps, tables, layers and the command line."""
