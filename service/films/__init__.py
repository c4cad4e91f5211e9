"""Films: requests about order tables, interpreted, analysed and reported."""
