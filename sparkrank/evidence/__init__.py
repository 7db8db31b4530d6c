"""Scored hosts → the candidates for review: ``candidates`` chooses and orders them, ``cautions`` says
what speaks against each."""
