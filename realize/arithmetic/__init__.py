"""The arithmetics: one protocol, and one module for each way of carrying a computation through.

`path` states what a form may ask for; `exact` and `floating` answer.
"""
