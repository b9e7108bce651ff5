"""The pages of the product and the header they share; layout only."""
