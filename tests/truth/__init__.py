"""The truth benchmark: does a correction bring a picture closer to what it should be?"""
