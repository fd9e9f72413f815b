"""Networks and a fault to a solution. Per unit inside, SI in what is returned."""
