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
THOMAS_1958 = Source(
    key="THOMAS_1958",
    authors="Thomas JW",
    year=1958,
    title="Gravity settling of particles in a horizontal tube",
    journal="Journal of the Air Pollution Control Association 8:32",
    known="from memory",
)
PICH_1972 = Source(
    key="PICH_1972",
    authors="Pich J",
    year=1972,
    title="Theory of gravitational deposition of particles from laminar flows",
    journal="Journal of Aerosol Science 3:351",
    known="from memory",
)
HEYDER_1977 = Source(
    key="HEYDER_1977",
    authors="Heyder J, Gebhart J",
    year=1977,
    title="Gravitational deposition from laminar flow through inclined tubes",
    journal="Journal of Aerosol Science 8:289",
    known="from memory",
)
SCHWENDIMAN_1975 = Source(
    key="SCHWENDIMAN_1975",
    authors="Schwendiman LC, Stegen GE, Glissmeyer JA",
    year=1975,
    title="Methods and aids for assessing particle losses in sampling lines",
    journal="Battelle report BNWL-SA-5138",
    known="from memory",
)
CRANE_1977 = Source(
    key="CRANE_1977",
    authors="Crane RI, Evans RL",
    year=1977,
    title="Inertial deposition of particles in a bent pipe",
    journal="Journal of Aerosol Science 8:161",
    known="from memory",
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

# --- placement, conduct and exposure: what the rules and the policies rest on --------

AARC_2012 = Source(
    key="AARC_2012",
    authors="Restrepo RD, Walsh BK (authors from memory)",
    year=2012,
    title="Humidification during invasive and noninvasive ventilation, guideline",
    journal="Respiratory Care 57:782",
    address="abstract in a public copy",
)
ARI_2010B = Source(
    key="ARI_2010B",
    authors="Ari A, Atalay OT, Harwood R, Sheard MM, Aljamhan EA, Fink JB",
    year=2010,
    title="Nebulizer type, position and bias flow in pediatric and adult lung models",
    journal="Respiratory Care 55(7):845",
    known="from memory",
)
BERLINSKI_2013 = Source(
    key="BERLINSKI_2013",
    authors="Berlinski A, Willis JR",
    year=2013,
    title="Albuterol delivery by 4 nebulizers in 4 positions, pediatric circuit",
    journal="Respiratory Care 58(7):1124",
    address="doi.org/10.4187/respcare.02074",
)
BERLINSKI_2015 = Source(
    key="BERLINSKI_2015",
    authors="Berlinski A, Willis JR",
    year=2015,
    title="Tidal volume, nebulizer type and position in a pediatric model",
    journal="Respiratory Care 60(10)",
    address="doi.org/10.4187/respcare.04013",
)
DHANANI_2016 = Source(
    key="DHANANI_2016",
    authors="Dhanani J and others",
    year=2016,
    title="Fundamentals of aerosol therapy in critical care",
    journal="Critical Care 20",
    address="doi.org/10.1186/s13054-016-1448-5 (Table 3)",
)
DIOT_1995 = Source(
    key="DIOT_1995",
    authors="Diot P, Morra L, Smaldone GC",
    year=1995,
    title="Albuterol delivery in a model of mechanical ventilation",
    journal="American Journal of Respiratory and Critical Care Medicine 152",
    known="from memory",
)
DUGERNIER_2017 = Source(
    key="DUGERNIER_2017",
    authors="Dugernier J, Ehrmann S, Sottiaux T and others",
    year=2017,
    title="Aerosol delivery during invasive mechanical ventilation: a review",
    journal="Critical Care 21:264",
    address="doi.org/10.1186/s13054-017-1844-5",
)
EHRMANN_2013 = Source(
    key="EHRMANN_2013",
    authors="Ehrmann S and others",
    year=2013,
    title="Aerosol therapy during mechanical ventilation: an international survey",
    journal="Intensive Care Medicine",
    address="pubmed 23525741",
)
EHRMANN_2017 = Source(
    key="EHRMANN_2017",
    authors="Ehrmann S and others",
    year=2017,
    title="Aerosol therapy in intensive care: table of advice on conduct",
    journal="Annals of Intensive Care 7",
    address="s13613-017-0301-6, Table 3",
)
GEORGOPOULOS_2000 = Source(
    key="GEORGOPOULOS_2000",
    authors="Georgopoulos D, Mouloudi E, Kondili E, Klimathianaki M",
    year=2000,
    title="Bronchodilator delivery with metered-dose inhaler in ventilated patients",
    journal="Critical Care 4:227",
    address="cc698, Table 1",
)
HOU_2022 = Source(
    key="HOU_2022",
    authors="Hou H, Xu D, Dai B and others",
    year=2022,
    title="Position of jet and mesh nebulizers during pressure-controlled ventilation",
    journal="Frontiers in Medicine 9:950569",
    address="doi.org/10.3389/fmed.2022.950569",
)
INSPSYNC_2024 = Source(
    key="INSPSYNC_2024",
    authors="not shown in the part read",
    year=2024,
    title="Inspiration-synchronised against continuous vibrating mesh, adult, bench",
    journal="Journal of Aerosol Medicine and Pulmonary Drug Delivery",
    address="doi.org/10.1089/jamp.2024.0047; companion conference abstract",
)
KELLY_ABSTRACT = Source(
    key="KELLY_ABSTRACT",
    authors="Kelly PM, O'Sullivan A, McKenna C, Sweeney L, MacLoughlin R",
    year=None,
    title="Nebulizer type and position, support ventilation, tracheostomised adults",
    journal="conference abstract, aerosol society",
    address="aerosol-soc.com/abstracts",
)
KLEINSTREUER_2014 = Source(
    key="KLEINSTREUER_2014",
    authors="Kleinstreuer C and others",
    year=2014,
    title="Drug-aerosol delivery: table of nebulizer kinds and their residuals",
    journal="Table 1, read in a public copy of the table",
)
LEE_2022 = Source(
    key="LEE_2022",
    authors="Lee and others",
    year=2022,
    title="Breath-enhanced jet nebulization on the dry side of the humidifier",
    journal="Respiratory Care 67:914",
    address="doi.org/10.4187/respcare.09459",
)
LI_2022 = Source(
    key="LI_2022",
    authors="Li X and others",
    year=2022,
    title="Effect of jet nebulizer gas on ventilator triggering",
    journal="Frontiers in Medicine 9:1004551",
)
MIURA_2026 = Source(
    key="MIURA_2026",
    authors="Miura and others",
    year=2026,
    title="Vibrating mesh in pediatric models by tidal volume",
    journal="abstract only, journal not shown in the part read",
)
NAUGHTON_2021 = Source(
    key="NAUGHTON_2021",
    authors="Naughton PJ, Joyce M, Mac Giolla Eain M, O'Sullivan A, MacLoughlin R",
    year=2021,
    title="Aerosol drug delivery options during adult mechanical ventilation",
    journal="Pharmaceutics 13(10):1574",
    address="doi.org/10.3390/pharmaceutics13101574",
)
NIOSH_AEROSOLIZED = Source(
    key="NIOSH_AEROSOLIZED",
    authors="US National Institute for Occupational Safety and Health",
    year=None,
    title="Aerosolized medications: hazards to those who give them",
    journal="web page",
    address="cdc.gov/niosh/topics/healthcarehsps/aerosolizedmeds.html",
)
ODOHERTY_1992 = Source(
    key="ODOHERTY_1992",
    authors="O'Doherty MJ, Thomas SHL, Page CJ, Treacher DF, Nunan TO",
    year=1992,
    title="Nebulizer type, position and volume of fill in a ventilated lung model",
    journal="American Review of Respiratory Disease 146:383",
    address="abridged abstract",
)
OTTO_2023 = Source(
    key="OTTO_2023",
    authors="Otto M, Kropp Y, Jaeger E and others",
    year=2023,
    title="Inspiration-synchronised mesh for prolonged iloprost, bench",
    journal="Pharmaceutics 15(8):2080",
)
REILLY_2024 = Source(
    key="REILLY_2024",
    authors="Reilly L, Mac Giolla Eain M, Murphy S, O'Sullivan A and others",
    year=2024,
    title="Respiratory circuit set-up and parameters, bench",
    journal="Frontiers in Medicine 10:1307301",
    address="doi.org/10.3389/fmed.2023.1307301",
)
SENSOR_NOTICE_2024 = Source(
    key="SENSOR_NOTICE_2024",
    authors="US Food and Drug Administration, as told by two trade journals",
    year=2024,
    title="Internal flow sensors of portable ventilators fouled by in-line aerosol",
    journal="device correction, November 2024",
)
THOMAS_1993 = Source(
    key="THOMAS_1993",
    authors="Thomas SHL, O'Doherty MJ, Fidler HM, Page CJ, Treacher DF, Nunan TO",
    year=1993,
    title="Pulmonary deposition of a nebulised aerosol during ventilation",
    journal="Thorax 48:154",
    address="thorax.bmj.com/content/48/2/154",
)
WAN_2014 = Source(
    key="WAN_2014",
    authors="Wan GH, Lin HL, Fink JB and others",
    year=2014,
    title="Nebulization modes in pediatric and adult mechanical ventilators",
    journal="Respiratory Care 59(10):1494",
    address="doi.org/10.4187/respcare.02999",
)
CALIBRATION_FIT = Source(
    key="CALIBRATION_FIT",
    authors="this project",
    year=None,
    title="Fit to the calibration studies of bench_delivery.csv",
    known="fitted",
)
ANHOEJ_2014 = Source(
    key="ANHOEJ_2014",
    authors="Anhoej J, Olesen AV",
    year=2014,
    title="Run charts revisited: a simulation study of run chart rules for detection "
    "of non-random variation in health care processes",
    journal="PLoS ONE 9:e113825",
    address="https://doi.org/10.1371/journal.pone.0113825",
    known="read",
)
NELSON_1994 = Source(
    key="NELSON_1994",
    authors="Nelson LS",
    year=1994,
    title="A control chart for parts-per-million nonconforming items",
    journal="Journal of Quality Technology 26:166",
    known="from memory",
)
NIST_HANDBOOK = Source(
    key="NIST_HANDBOOK",
    authors="NIST/SEMATECH",
    year=2012,
    title="e-Handbook of statistical methods, chapter 6",
    address="https://www.itl.nist.gov/div898/handbook/",
    known="read",
)
SPIEGELHALTER_2005 = Source(
    key="SPIEGELHALTER_2005",
    authors="Spiegelhalter DJ",
    year=2005,
    title="Funnel plots for comparing institutional performance",
    journal="Statistics in Medicine 24:1185",
    known="from memory",
)
NCHS_2023 = Source(
    key="NCHS_2023",
    authors="US National Center for Health Statistics",
    year=2023,
    title="Data presentation standards for rates and counts, evaluation report",
    address="https://stacks.cdc.gov/view/cdc/123462",
    known="read",
)
