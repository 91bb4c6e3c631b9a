"""One filter: window, circuit, response, flags."""
