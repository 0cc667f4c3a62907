"""The site as drawn and the balances that follow."""
