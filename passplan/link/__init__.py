"""Link budgets: how well a spacecraft is heard along a pass, and how much it can bring down.

Sources stand in the modules: ``budget`` (formulas), ``atmosphere`` (gas), ``chains`` (which radio is
served by what), ``stretches`` and ``choice`` (when a modcod holds), ``profiles`` (all windows at once),
``lines`` (one budget line by line), ``interference_scan`` and ``conflicts`` (who must not send at once).
"""
