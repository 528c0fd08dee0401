"""The experiment: contour, stream, coefficients, integration; nothing of probability."""
