"""Every formula and threshold cites one of these keys; what is our own construction says so."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Source:
    """Where a formula or threshold comes from.

    Attributes
    ----------
    citation : str
        As it would stand in a list of references.
    doi : str
        Empty where there is none.
    own : bool
        True for this project's own construction, which no paper vouches for.
    """

    citation: str
    doi: str = ""
    own: bool = False


SOURCES: dict[str, Source] = {
    "wilson1927": Source(
        "Wilson 1927, Probable inference, the law of succession, and statistical inference, "
        "J. Am. Stat. Assoc. 22:209-212",
        "10.1080/01621459.1927.10502953",
    ),
    "clopper_pearson1934": Source(
        "Clopper & Pearson 1934, The use of confidence or fiducial limits, Biometrika 26:404-413",
        "10.1093/biomet/26.4.404",
    ),
    "newcombe1998": Source(
        "Newcombe 1998, Interval estimation for the difference between independent proportions, "
        "Stat. Med. 17:873-890",
        "10.1002/(SICI)1097-0258(19980430)17:8<873::AID-SIM779>3.0.CO;2-I",
    ),
    "zou_donner2008": Source(
        "Zou & Donner 2008, Construction of confidence limits about effect measures, "
        "Stat. Med. 27:1693-1702",
        "10.1002/sim.3095",
    ),
    "donner_zou2012": Source(
        "Donner & Zou 2012, Closed-form confidence intervals for functions of the normal mean and "
        "standard deviation, Stat. Methods Med. Res. 21:347-359",
        "10.1177/0962280210383082",
    ),
    "hand_till2001": Source(
        "Hand & Till 2001, A simple generalisation of the area under the ROC curve for multiple "
        "class classification problems, Mach. Learn. 45:171-186",
        "10.1023/A:1010920819831",
    ),
    "airola2011": Source(
        "Airola et al. 2011, An experimental comparison of cross-validation techniques for "
        "estimating the area under the ROC curve, Comput. Stat. Data Anal. 55:1828-1844",
        "10.1016/j.csda.2010.11.018",
    ),
    "efron1983": Source(
        "Efron 1983, Estimating the error rate of a prediction rule, J. Am. Stat. Assoc. "
        "78:316-331",
        "10.1080/01621459.1983.10477973",
    ),
    "efron_tibshirani1993": Source(
        "Efron & Tibshirani 1993, An Introduction to the Bootstrap, chapters 5 and 6",
    ),
    "efron_tibshirani1997": Source(
        "Efron & Tibshirani 1997, Improvements on cross-validation: the .632+ bootstrap method, "
        "J. Am. Stat. Assoc. 92:548-560",
        "10.1080/01621459.1997.10474007",
    ),
    "kohavi1995": Source(
        "Kohavi 1995, A study of cross-validation and bootstrap for accuracy estimation and model "
        "selection, IJCAI 14:1137-1143",
    ),
    "beleites2013": Source(
        "Beleites et al. 2013, Sample size planning for classification models, Anal. Chim. Acta "
        "760:25-33",
        "10.1016/j.aca.2012.11.007",
    ),
    "kapoor2023": Source(
        "Kapoor & Narayanan 2023, Leakage and the reproducibility crisis in machine-learning-based "
        "science, Patterns 4:100804",
        "10.1016/j.patter.2023.100804",
    ),
    "agresti_coull1998": Source(
        "Agresti & Coull 1998, Approximate is better than exact for interval estimation of "
        "binomial proportions, Am. Stat. 52:119-126",
        "10.1080/00031305.1998.10480550",
    ),
    "brown2001": Source(
        "Brown, Cai & DasGupta 2001, Interval estimation for a binomial proportion, "
        "Stat. Sci. 16:101-133",
        "10.1214/ss/1009213286",
    ),
    "nadeau_bengio2003": Source(
        "Nadeau & Bengio 2003, Inference for the generalization error, Mach. Learn. 52:239-281",
        "10.1023/A:1024068626366",
    ),
    "corani_benavoli2015": Source(
        "Corani & Benavoli 2015, A Bayesian approach for comparing cross-validated algorithms on "
        "multiple data sets, Mach. Learn. 100:285-304",
        "10.1007/s10994-015-5486-z",
    ),
    "bayle2020": Source(
        "Bayle et al. 2020, Cross-validation confidence intervals for test error, NeurIPS 33"
    ),
    "efron1987": Source(
        "Efron 1987, Better bootstrap confidence intervals, J. Am. Stat. Assoc. 82:171-185",
        "10.1080/01621459.1987.10478410",
    ),
    "hanley_mcneil1982": Source(
        "Hanley & McNeil 1982, The meaning and use of the area under a receiver operating "
        "characteristic (ROC) curve, Radiology 143:29-36",
        "10.1148/radiology.143.1.7063747",
    ),
    "tsamardinos2018": Source(
        "Tsamardinos, Greasidou & Borboudakis 2018, Bootstrapping the out-of-sample predictions "
        "for efficient and accurate cross-validation, Mach. Learn. 107:1895-1922",
        "10.1007/s10994-018-5714-4",
    ),
    "holm1979": Source(
        "Holm 1979, A simple sequentially rejective multiple test procedure, Scand. J. Stat. "
        "6:65-70",
    ),
    "figueroa2012": Source(
        "Figueroa et al. 2012, Predicting sample size required for classification performance, "
        "BMC Med. Inform. Decis. Mak. 12:8",
        "10.1186/1472-6947-12-8",
    ),
    "wilks1941": Source(
        "Wilks 1941, Determination of sample sizes for setting tolerance limits, Ann. Math. Stat. "
        "12:91-96",
        "10.1214/aoms/1177731788",
    ),
    "vovk2005": Source(
        "Vovk, Gammerman & Shafer 2005, Algorithmic Learning in a Random World, Springer",
        "10.1007/b106715",
    ),
    "phipson_smyth2010": Source(
        "Phipson & Smyth 2010, Permutation p-values should never be zero, Stat. Appl. Genet. Mol. "
        "Biol. 9:39",
        "10.2202/1544-6115.1585",
    ),
    "own_model_variance": Source(
        "own construction: the model's own variability as a method-of-moments covariance between "
        "cases answered by one model; same idea as Nadeau & Bengio 2003, Mach. Learn. 52:239-281",
        "10.1023/A:1024068626366",
        own=True,
    ),
    "own_simulation": Source(
        "own simulation study: repeated tables with known truth; thresholds are judgement "
        "supported by it",
        own=True,
    ),
    "own_leakage": Source(
        "own thresholds; the kinds of leakage as in Kapoor & Narayanan 2023, Patterns 4:100804",
        "10.1016/j.patter.2023.100804",
        own=True,
    ),
    "own_learning_curve": Source(
        "own construction: units resampled at all sizes of a learning curve at once, and a call "
        "from the gain over the last doubling; the curve itself as in Figueroa et al. 2012, "
        "BMC Med. Inform. Decis. Mak. 12:8",
        "10.1186/1472-6947-12-8",
        own=True,
    ),
    "common_practice": Source("common practice, no source"),
    "elementary": Source("elementary probability"),
}
