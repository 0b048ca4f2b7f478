"""windage: does an active disturbance rejection control tuning hold on every unit that leaves the factory?

Describe plant, loop, spreads and requirements once; run 10^4 to 10^8 trials in parallel; read a verdict with an
exact bound, replay any trial to the last digit, and see which spread breaks the tuning.
"""

from ._audit import Audit
from ._controllers import ErrorADRC, OutputADRC
from ._errors import (
    DescriptionError,
    EngineError,
    EquationError,
    OutcomeFileError,
    OutputError,
    StudyFileError,
    WindageError,
)
from ._evidence import pass_probability_bounds, tolerance_bound, trials_needed
from ._loader import show_config
from ._loop import Loop
from ._measure_functions import (
    difference,
    final,
    iae,
    integral_absolute,
    integral_square,
    integral_time_absolute,
    ise,
    itae,
    maximum,
    mean,
    minimum,
    overshoot,
    peak,
    peak_to_peak,
    ratio,
    reversals,
    rise_time,
    rms,
    rms_change,
    settling_time,
    standard_deviation,
    time_in_saturation,
    time_of_peak,
    time_outside,
    total_variation,
    undershoot,
)
from ._measures import Measure, Requirement
from ._outcome import Outcome
from ._outcome_file import load_outcome
from ._plants import Plant
from ._replay import Replay
from ._sensor_actuator import Actuator, Sensor
from ._shared_numbers import column, shared
from ._spreads import beta, choice, lognormal, normal, samples, tolerance, triangular, uniform
from ._stock_plants import (
    DCDrive,
    FirstOrder,
    IntegratorChain,
    SecondOrder,
    StateSpace,
    TransferFunction,
    TwoMassDrive,
)
from ._study import Study
from ._study_file import load, save
from ._tally import Tally
from ._time_functions import (
    Constant,
    Gust,
    JerkLimited,
    Pulse,
    Quintic,
    Ramp,
    Sine,
    Step,
    Sum,
    Table,
    WhiteNoise,
)
from ._verdict import Verdict

__version__ = "0.1.0"

__all__ = [
    "Actuator",
    "Audit",
    "Constant",
    "DCDrive",
    "DescriptionError",
    "EngineError",
    "EquationError",
    "ErrorADRC",
    "FirstOrder",
    "Gust",
    "IntegratorChain",
    "JerkLimited",
    "Loop",
    "Measure",
    "Outcome",
    "OutcomeFileError",
    "OutputADRC",
    "OutputError",
    "Plant",
    "Pulse",
    "Quintic",
    "Ramp",
    "Replay",
    "Requirement",
    "SecondOrder",
    "Sensor",
    "Sine",
    "StateSpace",
    "Step",
    "Study",
    "StudyFileError",
    "Sum",
    "Table",
    "Tally",
    "TransferFunction",
    "TwoMassDrive",
    "Verdict",
    "WhiteNoise",
    "WindageError",
    "beta",
    "choice",
    "column",
    "difference",
    "final",
    "iae",
    "integral_absolute",
    "integral_square",
    "integral_time_absolute",
    "ise",
    "itae",
    "load",
    "load_outcome",
    "lognormal",
    "maximum",
    "mean",
    "minimum",
    "normal",
    "overshoot",
    "pass_probability_bounds",
    "peak",
    "peak_to_peak",
    "ratio",
    "reversals",
    "rise_time",
    "rms",
    "rms_change",
    "samples",
    "save",
    "settling_time",
    "shared",
    "show_config",
    "standard_deviation",
    "time_in_saturation",
    "time_of_peak",
    "time_outside",
    "tolerance",
    "tolerance_bound",
    "total_variation",
    "trials_needed",
    "triangular",
    "undershoot",
    "uniform",
]
