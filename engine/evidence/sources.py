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
CUCCIA_2020 = Source(
    key="CUCCIA_2020",
    authors="Cuccia AD, Ashraf S, McPeck M, Samuel J, Smaldone GC",
    year=2020,
    title="Wet-side breath-enhanced jet nebulization",
    journal="Respiratory Care 65(8):1077",
    address="rc.rcjournal.com/content/65/8/1077",
)
DUBUS_2005 = Source(
    key="DUBUS_2005",
    authors="Dubus JC, Vecellio L, De Monte M and others",
    year=2005,
    title="Aerosol deposition in neonatal ventilation",
    journal="Pediatric Research 58(1):10",
    address="abstract in a public copy of the first page",
)
LELLOUCHE_2024 = Source(
    key="LELLOUCHE_2024",
    authors="Lellouche F and others",
    year=2024,
    title="Gas humidity after a heated humidifier is switched off",
    journal="Respiratory Care 69(10):1239",
)
CHEST_1987 = Source(
    key="CHEST_1987",
    authors="not shown in the part read",
    year=1987,
    title="Output and droplet size of jet and ultrasonic nebulizers",
    journal="Chest 92:991",
)
ALLEN_RAABE_1985 = Source(
    key="ALLEN_RAABE_1985",
    authors="Allen MD, Raabe OG",
    year=1985,
    title="Slip correction measurements of spherical solid aerosol particles",
    journal="Aerosol Science and Technology 4:269",
    known="from memory",
)
ARI_2010A = Source(
    key="ARI_2010A",
    authors="Ari A, Areabi H, Fink JB",
    year=2010,
    title="Aerosol generators at 3 locations, humidified and dry adult circuits",
    journal="Respiratory Care 55(7):837",
    address="pubmed 20587094",
)
ARI_2012 = Source(
    key="ARI_2012",
    authors="Ari A, Harwood R, Sheard M, Fink JB",
    year=2012,
    title="Aerosol through tracheostomy and endotracheal tubes",
    journal="Respiratory Care 57(7):1066",
)
ARI_2016 = Source(
    key="ARI_2016",
    authors="Ari A, Fink JB, Pilbeam SP",
    year=2016,
    title="Dose at the ventilator outlet with and without expiratory filters",
    journal="Indian Journal of Respiratory Care 5(1):677",
)
WILKES_2002 = Source(
    key="WILKES_2002",
    authors="Wilkes AR (author and year from memory)",
    year=2002,
    title="Penetration of sodium chloride particles through 33 breathing filters",
    journal="Anaesthesia",
)
WILKES_2004 = Source(
    key="WILKES_2004",
    authors="not shown in the part read",
    year=2004,
    title="Flow and penetration of breathing-system filters",
    journal="Anaesthesia 59:278",
    address="pubmed 14984527",
)
PUI_1987 = Source(
    key="PUI_1987",
    authors="Pui DYH, Romay-Novas F, Liu BYH",
    year=1987,
    title="Experimental study of particle deposition in bends of circular tubes",
    journal="Aerosol Science and Technology 7:301",
)
LIU_AGARWAL_1974 = Source(
    key="LIU_AGARWAL_1974",
    authors="Liu BYH, Agarwal JK",
    year=1974,
    title="Experimental observation of aerosol deposition in turbulent flow",
    journal="Journal of Aerosol Science 5:145",
)
FRIEDLANDER_1957 = Source(
    key="FRIEDLANDER_1957",
    authors="Friedlander SK, Johnstone HF",
    year=1957,
    title="Deposition of suspended particles from turbulent gas streams",
    journal="Industrial and Engineering Chemistry 49:1151",
    known="from memory",
)
ALDUCHOV_1996 = Source(
    key="ALDUCHOV_1996",
    authors="Alduchov OA, Eskridge RE",
    year=1996,
    title="Improved Magnus form approximation of saturation vapor pressure",
    journal="Journal of Applied Meteorology 35:601",
    known="from memory",
)
CODATA = Source(
    key="CODATA",
    authors="CODATA and standard tables",
    year=2018,
    title="Physical constants and molar masses",
    known="from memory",
)
DAVIES_1945 = Source(
    key="DAVIES_1945",
    authors="Davies CN",
    year=1945,
    title="Definitive equations for the fluid resistance of spheres",
    journal="Proceedings of the Physical Society 57:259",
)
HINDS_1999 = Source(
    key="HINDS_1999",
    authors="Hinds WC",
    year=1999,
    title="Aerosol Technology, second edition",
    journal="Wiley",
    known="from memory",
)
HUTCHINS_1995 = Source(
    key="HUTCHINS_1995",
    authors="Hutchins DK, Harper MH, Felder RL",
    year=1995,
    title="Slip correction measurements for solid spherical particles",
    journal="Aerosol Science and Technology 22:202",
)
ICRP_66 = Source(
    key="ICRP_66",
    authors="International Commission on Radiological Protection",
    year=1994,
    title="Human respiratory tract model, Publication 66",
    journal="Annals of the ICRP 24(1-3)",
    address="coefficients in the public KDEP source",
)
KIM_2005 = Source(
    key="KIM_2005",
    authors="Kim JH, Mulholland GW, Kukuck SR, Pui DYH",
    year=2005,
    title="Slip correction measurements of certified PSL nanoparticles",
    journal="Journal of Research of NIST 110:31",
)
PITZER_1973 = Source(
    key="PITZER_1973",
    authors="Pitzer KS, Mayorga G",
    year=1973,
    title="Thermodynamics of electrolytes II",
    journal="Journal of Physical Chemistry 77:2300",
    known="from memory",
)
BLASIUS_1913 = Source(
    key="BLASIUS_1913",
    authors="Blasius H",
    year=1913,
    title="Law of similarity for friction in fluids",
    journal="VDI Mitteilungen 131",
    known="from memory",
)
ANESTHESIOLOGY_2017 = Source(
    key="ANESTHESIOLOGY_2017",
    authors="image report, authors not noted",
    year=2017,
    title="A circuit filter clogged by nebulised epoprostenol",
    journal="Anesthesiology 127(2):383",
)
CHAN_2025 = Source(
    key="CHAN_2025",
    authors="Chan C",
    year=2025,
    title="Slow pressure decay after nebulised tranexamic acid (teaching case 4933)",
    journal="University teaching series",
    address="umem.org/educational_pearls/4933",
)
ESCMID_2017 = Source(
    key="ESCMID_2017",
    authors="European consensus group",
    year=2017,
    title="Position paper on nebulised anti-infectives in ventilated patients",
    journal="Clinical Microbiology and Infection 23:640",
    address="pubmed 28347790",
)
FDA_2009 = Source(
    key="FDA_2009",
    authors="US Food and Drug Administration",
    year=2009,
    title="Safety alert on nebulised zanamivir powder, 9 October 2009",
    journal="as reported in the medical press",
    address="medscape.com/viewarticle/710336",
)
RIBAVIRIN_LABEL = Source(
    key="RIBAVIRIN_LABEL",
    authors="label of ribavirin for inhalation",
    year=None,
    title="Boxed warning on precipitate in ventilator circuits",
    journal="drug label",
    address="blackboxrx.com/app/display/144",
)
WILLIAMS_2010 = Source(
    key="WILLIAMS_2010",
    authors="Williams JD and others",
    year=2010,
    title="Obstruction of an HME during continuous nebulisation",
    journal="Chest 138(4 Suppl):10A",
)
WILSON_1931 = Source(
    key="WILSON_1931",
    authors="Wilson EB, Hilferty MM",
    year=1931,
    title="The distribution of chi-square",
    journal="Proceedings of the National Academy of Sciences 17:684",
    known="from memory",
)
CDC_2003 = Source(
    key="CDC_2003",
    authors="Centers for Disease Control and Prevention",
    year=2003,
    title="Environmental infection control in health-care facilities, Appendix B",
    address="cdc.gov/infection-control/hcp/environmental-control/appendix-b-air.html",
)
OTOOLE_2020 = Source(
    key="OTOOLE_2020",
    authors="O'Toole C, McGrath JA, Joyce M and others",
    year=2020,
    title="Fugitive aerosol beside a ventilated bench lung",
    journal="Aerosol and Air Quality Research 20:2604",
    address="aaqr.org/articles/aaqr-20-04-covid-0176",
)
