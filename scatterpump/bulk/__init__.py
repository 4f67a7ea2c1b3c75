"""The endless interior of a pump on the (k, phi) torus: its gap, its Chern number, its decay length."""
