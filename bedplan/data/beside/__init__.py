"""The files beside the ward stays: beds, midnight census, monthly returns, refusals, requests and cancellations."""
