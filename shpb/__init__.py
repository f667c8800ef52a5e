"""Split Hopkinson pressure bar shots: from voltage records to curves that can be trusted."""
