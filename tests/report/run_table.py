"""One small table for the tests of a run: five invented waters, one of which no water can be.

torn: at pH 10.5 and 12 °C hydroxide alone is 0.11 meq/L (pKw 14.45), more than its alkalinity.
"""

TABLE = """sample_id,water_kind,temperature_c,ph,alkalinity_meq_l,sulfate_mg_l
hill,lake,8,6.6,0.03,<0.5
moor,lake,9,6.9,0.12,4
vale,stream,12,7.8,1.5,12
torn,stream,12,10.5,0.05,12
main,treated_water,15,8.2,1.1,20
"""
TORN = "torn,stream,12,10.5,0.05,12\n"
