"""faultassay: does a recorded short circuit agree with RL-circuit theory?"""
