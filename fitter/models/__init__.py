"""The equations: pure functions of numbers and arrays, in SI, n-channel polarity.

Every equation broadcasts over its parameters as well as over its variables, and takes complex arguments: an
imaginary part of 1e-30 in a parameter returns the exact derivative by it in the result's imaginary part
(W. Squire and G. Trapp, SIAM Rev. 40 (1998) 110).
"""
