"""ledger/intercompany.csv and ledger/companies.csv: what six companies that do not exist paid each other in a month.

Every number is a whole number of cents; what a company received less what it paid plus its net is zero, exactly.

Run: python examples/data/make_ledger.py [OUTDIR]
"""

from tables import decimal_text, output_folder, write_table

COMPANIES = ["Alder Holding", "Birch Freight", "Cedar Foods", "Elm Energy", "Hazel Retail", "Willow Works"]
PAYMENTS = [  # payer, payee, cents: 1_204_417_10 is 1,204,417.10
    ("Birch Freight", "Alder Holding", 1_204_417_10),
    ("Cedar Foods", "Alder Holding", 873_950_20),
    ("Hazel Retail", "Alder Holding", 2_410_008_35),
    ("Alder Holding", "Willow Works", 1_985_000_00),
    ("Hazel Retail", "Cedar Foods", 3_318_742_07),
    ("Cedar Foods", "Birch Freight", 642_119_93),
    ("Hazel Retail", "Birch Freight", 418_306_11),
    ("Willow Works", "Elm Energy", 297_653_48),
    ("Birch Freight", "Elm Energy", 88_214_70),
    ("Elm Energy", "Alder Holding", 150_000_01),
]


def main():
    """Write intercompany.csv and companies.csv."""
    folder = output_folder("make the tables of the ledger") / "ledger"
    net = dict.fromkeys(COMPANIES, 0)
    for payer, payee, cents in PAYMENTS:
        net[payer] += cents
        net[payee] -= cents
    lines = [
        (f"T{number:02d}", payer, payee, decimal_text(cents, 2))
        for number, (payer, payee, cents) in enumerate(PAYMENTS, start=1)
    ]
    write_table(folder / "intercompany.csv", ["id", "from", "to", "amount"], lines)
    companies = [(name, decimal_text(cents, 2)) for name, cents in net.items()]
    write_table(folder / "companies.csv", ["id", "net"], companies)


if __name__ == "__main__":
    main()
