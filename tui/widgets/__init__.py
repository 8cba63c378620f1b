"""The parts that the screens are put together from; they draw what they are given and compute no physics."""
