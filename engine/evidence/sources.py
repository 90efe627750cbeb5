"""Every work cited, once."""

from engine.evidence.shape import Source

COMMON_PRACTICE = Source(
    key="COMMON_PRACTICE",
    authors="the trade",
    year=None,
    title="Common practice of respiratory care, no source",
    known="common practice",
)
OURS = Source(
    key="OURS",
    authors="this project",
    year=None,
    title="A choice made for this project; change it in the policy or say why not",
    known="ours",
)

BAI_1997 = Source(
    key="BAI_1997",
    authors="Bai J",
    year=1997,
    title="Estimation of a change point in multiple regression models",
    journal="Review of Economics and Statistics 79:551",
    known="from memory",
)
FIELLER_1954 = Source(
    key="FIELLER_1954",
    authors="Fieller EC",
    year=1954,
    title="Some problems in interval estimation",
    journal="Journal of the Royal Statistical Society B 16:175",
    known="from memory",
)
FREEDMAN_1983 = Source(
    key="FREEDMAN_1983",
    authors="Freedman D, Lane D",
    year=1983,
    title="A nonstochastic interpretation of reported significance levels",
    journal="Journal of Business and Economic Statistics 1:292",
    known="from memory",
)
GILBERT_1987 = Source(
    key="GILBERT_1987",
    authors="Gilbert RO",
    year=1987,
    title="Statistical Methods for Environmental Pollution Monitoring",
    known="from memory",
)
GREENWELL_2014 = Source(
    key="GREENWELL_2014",
    authors="Greenwell BM, Schubert Kabban CM",
    year=2014,
    title="investr: an R package for inverse estimation",
    journal="The R Journal 6(1):90",
)
JIANG_2022 = Source(
    key="JIANG_2022",
    authors="Jiang Z, Liang H, Peng G and others",
    year=2022,
    title="Resistance of breathing-circuit filters after nebulised drugs",
    journal="Annals of Translational Medicine 10(4):189",
    address="doi.org/10.21037/atm-22-84",
)
PETTITT_1979 = Source(
    key="PETTITT_1979",
    authors="Pettitt AN",
    year=1979,
    title="A non-parametric approach to the change-point problem",
    journal="Applied Statistics 28:126",
)
SEN_1968 = Source(
    key="SEN_1968",
    authors="Sen PK",
    year=1968,
    title="Estimates of the regression coefficient based on Kendall's tau",
    journal="Journal of the American Statistical Association 63:1379",
)
GOVONI_2012 = Source(
    key="GOVONI_2012",
    authors="Govoni L and others",
    year=2012,
    title="Delivered against set values of intensive-care ventilators",
    journal="Medical Devices (Auckland), doi 10.2147/MDER.S35864",
)
SANBORN_2005 = Source(
    key="SANBORN_2005",
    authors="Sanborn WG",
    year=2005,
    title="Accuracy of flow and pressure sensors in hospital ventilators",
    journal="Respiratory Care",
)
AGRESTI_1990 = Source(
    key="AGRESTI_1990",
    authors="Agresti A",
    year=1990,
    title="Categorical Data Analysis",
    journal="Wiley",
    known="from memory",
)
BRESLOW_1980 = Source(
    key="BRESLOW_1980",
    authors="Breslow NE, Day NE",
    year=1980,
    title="Statistical Methods in Cancer Research, volume 1",
    journal="IARC Scientific Publications 32",
    known="from memory",
)
MACLURE_1991 = Source(
    key="MACLURE_1991",
    authors="Maclure M",
    year=1991,
    title="The case-crossover design",
    journal="American Journal of Epidemiology 133:144",
    address="pubmed 1985444",
)
FARRINGTON_1995 = Source(
    key="FARRINGTON_1995",
    authors="Farrington CP",
    year=1995,
    title="Relative incidence estimation from case series",
    journal="Biometrics 51:228",
    known="from memory",
)
