"""Crank-angle rooms: kinematics of the slider-crank."""
