"""How a given body can best climb a given wall.

The rooms of the package, each importing only from those before it: ``wall``, ``body``,
``posture``, ``stance``, ``motion``, ``route``, ``study``, ``figure``, ``cli``.
Inside the code lengths are in metres, angles in radians, masses in kilograms and times in
seconds; files and reports use millimetres and degrees, and say so in their keys.
"""

__version__ = "0.1.0"
