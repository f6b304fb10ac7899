"""The rig as plain data, the equations that it stands for, and the judge that measures poses."""
