"""Example devices, which the package carries along so that ``scatterpump example`` can write them anywhere."""
