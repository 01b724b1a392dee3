"""Looking ahead: rhythm, trend, forecasts with their bands, and the check of all that on last year."""
