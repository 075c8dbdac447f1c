"""What a user does, one file per noun: the only place where the library and the engines meet. One transaction, one
event.
"""
