"""Results of a sector model turned into the results of the whole body.

The one idea, for a copy made by the placement ``g`` (``x -> Q x + t``)::

    f(g x) = chi(g) * rho(Q) * f(x)

``chi`` is the load behaviour, ``rho`` the way the quantity turns with the body.
"""
