"""
An invented demonstration: nine quays of a harbour authority, corroding.

Nothing in this folder was measured. Quays, gauges, readings, rates and the
decision to re-coat are invented so that every step from readings to answers can
be followed and run again:

- ``make_data`` invents the readings and writes ``readings.csv``;
- ``readings`` reads them back;
- ``sample`` draws from the posterior of the corrosion rates, ``draws.npz``;
- ``model`` states priors, likelihood and the six changes as Steelyard sees them;
- ``page`` and ``picture`` show what ``python -m steelyard`` prints and draws.
"""
