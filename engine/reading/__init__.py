"""From a file to a Case. Only this room opens case files, and units convert at this door."""
