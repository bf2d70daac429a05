"""Pictures: one file a figure, each a function that draws on given axes and returns them."""
