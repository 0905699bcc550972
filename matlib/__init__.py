"""What a material is: Prony series, shift laws, cards and stress updates. SI units, numpy in and numpy out."""
