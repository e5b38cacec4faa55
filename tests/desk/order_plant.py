"""A small invented plant for orders: one oil of each kind, two kettles."""

from __future__ import annotations

from pathlib import Path

from tests.desk.made_batches import plant_file

# ruff: noqa: E501
STOCKS = """stock,name,oil,kind,api_group,on_hand_kg,unpumpable_kg,price_per_t,density15,kv40,kv100,division_kg,package_kg,least_charge_kg,flash,water,sulfur,phosphorus,tested_on,source
N32,Light neutral (tank 1),,base,I,60000,500,800,868,32,5.4,10,,,212,30,0.4,,2026-03-01,own
N100,Medium neutral (tank 2),,base,I,60000,500,850,880,98,10.9,10,,,248,30,0.5,,2026-03-01,own
G320,Heavy oil (tank 3),,base,I,40000,500,1100,898,320,24,10,,,280,30,0.6,,2026-03-01,own
PK,Package,,additive,,2000,0,3400,1010,90,9.1,0.5,,,150,240,6.5,30000,2026-02-01,certificate
AF,Antifoam 4,,additive,,200,0,5000,960,120,12,0.1,,,160,40,0,,,typical
VM,Viscosity modifier,,vi_improver,,7400,0,2120,876,7150,705,,180,,198,60,0.05,,2026-01-15,certificate
PD,Pour depressant,,pour_depressant,,900,0,3300,902,310,33.5,0.1,,,182,120,0.1,,2026-01-15,typical
RW,Returns (tank 9),,rework,,8000,0,430,874,44,6.6,10,,100,206,220,0.38,,2026-04-01,own
"""
PRODUCTS = """product,name,grade,batch_kg,only_listed
P46,Hydraulic oil 46,ISO VG 46,10000,yes
ONE,One oil,,10000,yes
"""
LIMITS = """product,property,low,high,guard
P46,kv40,,,2%
P46,vi,90,,
P46,flash,190,,
ONE,kv40,28,36,
"""
SHARES = """product,of,low_pct,high_pct
P46,PK,0.85,0.85
P46,AF,0.02,0.02
P46,PD,0.2,0.2
P46,N32,,
P46,N100,,
ONE,N32,,
"""
VESSELS = """vessel,capacity_l,least_fill_l,division_kg,heel_kg,heel_stock,flash_margin_c,flash_margin_on
K1,15000,4000,20,100,N100,30,2026-01-12
K2,4000,1000,1,,,,
K3,,,,,,,
TINY,100,,,,,,
"""


def order_plant(folder: Path) -> Path:
    """The plant as a file."""
    return plant_file(folder, stocks=STOCKS, products=PRODUCTS, limits=LIMITS, shares=SHARES, vessels=VESSELS)
