"""Rigid-body kernel: plain float arrays in, plain float arrays out. Imports nothing of the project outside this folder."""
