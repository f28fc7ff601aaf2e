"""Sets of total states as binary decision diagrams (Bryant 1986, recalled), and what is read off them."""
