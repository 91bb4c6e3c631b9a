"""Writers that turn a plan into text, and the folder that holds them."""
