import numpy as np, pytest
from opacity.check.run import run_checks
B='''
[[band_strength]]
name = "x"
range = [2000.0, 2250.0]
strength = 1.013e-17
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.007
source = "x"
'''
@pytest.mark.parametrize("t", [[296.],[250.,350.],[290.,302.],[200.,400.],[150.,700.],[150,200,250,300,400,700]], ids=str)
def test_b(make_case, t):
    case = make_case(extra=B, nodes=f"temperature={t}\npressure=[0.1,1.0]", wavenumber="{ start = 2000.0, stop = 2300.0, step = 0.01 }")
    r = run_checks(case.values, case.recipe, case.lines, 3)
    print(r.results[2])
