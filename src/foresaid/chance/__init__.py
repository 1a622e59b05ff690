"""What the same words would have scored with no forecaster behind them."""
