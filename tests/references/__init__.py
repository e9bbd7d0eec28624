"""Slow references of the mathematics, by other methods than the service's, at fifty digits where it counts.

They stand alone: nothing here imports from `service`. A plant and a controller are read by the names of their
fields, with the definitions of the interface written down again (`told`): an error of reading shows too.

- `told`: plant and controller as polynomials of fifty digits.
- `winding`: roots right of a line by the turning of the characteristic function along it.
- `characteristic_roots`: the roots themselves, Newton from every point of a grid.
- `margins`: dense search over frequency, each find bisected at fifty digits.
- `marching`: step responses by marching the delayed loop in small steps with an exponential integrator.
- `measures`: the metrics of a marched response.
- `worst_case`: the worst member of a box of models, by dense search over members and frequency.
- `sampled_told`: the same loop at its scan, as polynomials in z; its roots, found and counted.
- `sampled_margins`: dense search on the unit circle; the delay margin by lengthening the dead time.
- `sampled_marching`: the controller's difference equations, the plant's answer in between, noise.
"""
