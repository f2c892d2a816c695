"""Words in the names of fields, and what they hint at. English; hints only: the values decide."""

from __future__ import annotations


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


QUANTITY = _words(
    "size sizes units unit qty quantity amount bytes duration elapsed latency took minutes seconds hours cost claim "
    "loss damage weight kg kilos tonnes volume value total price sum paid payout payment downtime outage ms kb mb "
    "length population magnitude area acres energy kwh delay wait count items pieces parcels sent received"
)
STRONG_QUANTITY = _words("size units qty quantity amount bytes duration weight claim loss downtime kg elapsed")
DURATION = _words("duration elapsed latency took downtime outage seconds minutes hours ms delay wait")
IDENTIFIER = _words(
    "id ids uuid guid key ref reference no nr num number pid tid thread seq sequence index row serial sku zip postcode "
    "phone account iban customer user invoice ticket session trace span order line job card"
)
IDENTIFIER_OF_EVENT = _words("id ids uuid guid ref reference no nr order claim ticket invoice request trace job")
NO_QUANTITY = {
    "a port": _words("port sport dport"),
    "a status or a code": _words("status code errno rc exit"),
    "a place on earth": _words("lat lon lng latitude longitude"),
    "a version": _words("version revision build v"),
    "a level, rank or score": _words("level severity priority rank rating score grade"),
    "a part of a date": _words("year month day hour week weekday"),
    "a share": _words("percent pct ratio share probability"),
    "a temperature": _words("temperature temp celsius"),
}
EVENT_TIME = _words("time timestamp ts at date when datetime occurred event placed created ordered logged")
END_TIME = _words("end ended stop stopped finish finished closed completed restored until")
OTHER_TIME = _words("due planned scheduled expires expiry birth valid expected updated modified deadline promised")
PLACE = _words(
    "dock site warehouse plant region zone branch shop store desk team line carrier supplier host server node machine "
    "cluster instance service app queue topic bucket volume shard channel area county country city station department "
    "product class peril tenant room source origin location lane feeder substation worker"
)
NO_PLACE = _words(
    "level severity status state result outcome currency ccy unit uom method protocol version message msg reason flag "
    "success ok error retry test debug verb referer agent ident user"
)
CURRENCY = _words("currency ccy")
