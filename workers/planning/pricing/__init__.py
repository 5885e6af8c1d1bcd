"""What promises cost: each row of each commitment, and each further hour of one.

Every figure is the difference of two margins of the fleet, each known as an interval: what a schedule earns, and what
is proven that none can exceed. Only the independent parts that hold the rows in question are solved again.
"""
