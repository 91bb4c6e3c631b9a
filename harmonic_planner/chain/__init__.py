"""Lines carried through the chain, and the limits turned into rejections: arrays in, arrays out."""
