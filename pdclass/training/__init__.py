"""From labelled pulses to a bundle, and how good it is: the only room that imports scikit-learn."""
