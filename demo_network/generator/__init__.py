"""The invented island, its weather and its network.

Nothing here imports fieldgen: the demo is an independent witness.
"""
