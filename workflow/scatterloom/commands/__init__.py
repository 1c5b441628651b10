"""The commands, each in a module of its own with NAME, HELP, configure and execute.

The list is fixed and carries the one-line help, so that showing the help, or running one
command, imports none of the others.
"""

COMMANDS = {
    "check": "check a campaign file and say how large its table is",
    "estimate": "predict cases, jobs, time and memory of a campaign",
    "run": "run a campaign, or resume it",
    "status": "show what is done, running, failed and left",
    "gather": "write the table from the solved cases (run does this by itself)",
    "solve-job": "solve the cases of one job file (run does this by itself)",
    "solve-single": "solve one large particle lit from few directions (run does this by itself)",
    "verify": "check the integrity of a table, or solve a sample of it again",
    "pack": "put a campaign into one file for somebody else",
    "unpack": "unpack a campaign from somebody else, and run it if wanted",
    "figures": "draw the figures of a campaign",
    "bulk": "average the table over the populations of a campaign",
    "orient": "average solved cases over the orientations a campaign names",
    "exchange": "write the populations' expansion coefficients for radiative transfer",
    "compare": "compare a measured scattering matrix with a campaign",
    "report": "write the report of a campaign as one HTML page",
    "audit": "check the table against the laws of physics",
}
"""Name of every command and its help; its module is named the same, with underscores."""
