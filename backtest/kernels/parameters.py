"""The parameters of the GARCH family, their order, and the words that number choices in compiled code.

Mean: c + phi x_{t-1}. Variance: h_t = omega + (alpha + gamma [e_{t-1} > 0]) e_{t-1}^2 + beta h_{t-1}, e a loss. Law of
the standardised residual: normal, Student t with eta = 1 / nu, or Hansen's skewed t with eta and lambda.
"""

C, PHI, OMEGA, ALPHA, GAMMA, BETA, ETA, LAMBDA = range(8)
COUNT = 8

ZERO, CONSTANT_MEAN, AR1, AR1_NO_INTERCEPT = range(4)
"""Means."""

SAMPLE_VARIANCE, MEAN_SQUARE, UNCONDITIONAL, EWMA_75 = range(4)
"""Start-up rules for the variance before the first day; the first and the last stay fixed during a fit."""
