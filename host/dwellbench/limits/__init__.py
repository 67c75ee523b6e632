"""Published limits as data, the places in a circuit, and the rule that turns a doubtful number into a
verdict.
"""
