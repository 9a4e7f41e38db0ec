"""The words that instruments and loggers write above their numbers, and what they mean."""

from __future__ import annotations

import re

from drivers.files.units import Unit, unit_in_name

_CONCEPTS = {
    "interval": "sampleinterval samplinginterval interval sampleperiod samplingperiod xincrement "
    "xincr xinc increment deltat dt dx deltax timestep timepersample horizontalinterval "
    "horizinterval sampletime samplingtime tinterval timeinterval timeincrement timeresolution "
    "xdelta hresolution tinc tincr",
    "rate": "samplerate samplingrate fs samplingfrequency samplefrequency rate acquisitionrate "
    "samplespersecond srate samplingfreq samplerateinhz scanrate",
    "clock": "clock sampleclock clocktime samplingclock",
    "length": "recordlength memorylength points numberofpoints samples numberofsamples nrpt nopoints "
    "noofpoints datapoints pointcount samplecount segmentsize waveformpoints memorysize nosamples",
    "y_unit": "verticalunits verticalunit yunit yunits unit units vunit vunits",
    "x_unit": "horizontalunits horizontalunit xunit xunits timeunit timeunits hunit hunits",
    "y_step": "ymult ymultiplier voltspercode voltsperlsb voltspercount vpercode lsb lsbsize "
    "codesize stepsize verticalgain voltageperlsb",
    "y_increment": "yincrement yinc yincr",
    "y_zero": "yzero",
    "y_code_offset": "yoff yoffset",
    "y_origin": "yorigin yorg",
    "y_reference": "yreference yref",
    "y_division": "verticalscale vdiv voltsdiv voltsperdivision voltsperdiv verticaldivision",
    "y_offset": "verticaloffset",
    "bits": "bits adcbits nominalbits resolutionbits verticalbits bitspersample",
    "coupling": "coupling verticalcoupling channelcoupling inputcoupling",
    "mode": "acquisitionmode acquiremode acqmode ptfmt pointformat acquisitiontype samplemode "
    "samplingmode",
    "averages": "averages averagecount numberofaverages numavg avgcount",
    "segments": "segments segmentcount numberofsegments",
    "data": "waveformdata",
}
_CONCEPT = {word: concept for concept, words in _CONCEPTS.items() for word in words.split()}


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


TIME_NAMES = _words(
    "time t zeit temps tiempo tempo seconds second elapsed elapsedtime reltime relativetime "
    "timestamp times timebase xtime"
)
INDEX_NAMES = _words(
    "index sample samples samplenumber sampleno point points pointno pt no nr number n i idx # "
    "sequence seq row record count counter"
)
CODE_NAMES = _words(
    "adc adccode adccodes code codes raw rawcode rawcodes counts adccounts lsb adcraw digits "
    "adcvalue rawvalue rawadc rawdata"
)
STATISTICS = _words("max maximum min minimum mean average rms pkpk peaktopeak vpp stddev cycles")
FREQUENCY_NAMES = _words("frequency freq f hz frequenz frequence frecuencia")
_BRACKETS = re.compile(r"[(\[{][^()\[\]{}]*[)\]}]")


def squeeze(name: str) -> str:
    """Reduce a name to lower-case letters and digits, without what stands in brackets."""
    bare = _BRACKETS.sub("", name).casefold()
    return "#" if bare.strip() == "#" else re.sub(r"[\W_]", "", bare)


def concept_of(text: str) -> tuple[str | None, Unit | None]:
    """Find what a key means, and the unit it carries: `Sample Interval (us)`, `dt/s`."""
    concept = _CONCEPT.get(squeeze(text))
    if concept:
        return concept, unit_in_name(text)
    if (unit := unit_in_name(text)) is not None:
        bare = re.sub(r"[\s_/,]+\S+$", "", text)
        return _CONCEPT.get(squeeze(bare)), unit
    return None, None
