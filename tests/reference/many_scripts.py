"""Invented logbook entries in many scripts, written in all the ways that make a word hard to cut.

An entry is the params of one `item.file`. Every third phrase or so earns a tag; some tags are forgotten. The same seed
gives the same entries on every version of Python: of its random generator only random() is used.
"""

import random
import unicodedata

# By language: what stands between phrases, and the phrases; the n-th of each speaks of the n-th of TAGS.
TAGS = ("fog", "lamp", "ships", "gales", "supplies", "birds", "tides", "repairs")
PHRASES = {
    "en": (" ", "fog-bell rung till dawn|the keeper’s lamp re-lit|two ships’ lanterns sighted|gale force 9.5 by N.N.E.|"
                "oil, 3,500 lb. landed|a café-au-lait gull|ebb at 4:30 o'clock|naïve re-glazing of the cupola"),
    "de": (" ", "dichter Nebel über der Förde|das Leuchtfeuer brannte ruhig|drei Dampfschiffe grüßten|Sturmböen aus Südwest|"
                "Petroleum und Proviant gelöscht|Möwen am Fuß des Turmes|Ebbe um Mitternacht|Straße zum Haus ausgebessert"),
    "fr": (" ", "brume épaisse jusqu'à l'aube|l’œil du phare rallumé|deux goélettes aperçues|coup de vent d’équinoxe|"
                "l'huile débarquée à Noël|cormorans et fous|marée basse à onze heures|échelle réparée"),
    "es": (" ", "niebla toda la mañana|la lámpara encendida|tres goletas al sur|temporal del noroeste|"
                "aceite y víveres|gaviotas en el peñón|bajamar al mediodía|señal reparada"),
    "pl": (" ", "gęsta mgła nad zatoką|światło latarni zapalono|dwa żaglowce|wichura z północy|"
                "nafta dostarczona łodzią|żurawie nad wydmą|odpływ o świcie|naprawiono dźwig"),
    "tr": (" ", "SİS çanı çaldı|ışık yakıldı|iki gemi göründü|poyraz fırtınası|gazyağı geldi|martılar|gelgit|onarım ISITILDI"),
    "vi": (" ", "sương mù dày đặc|đèn được thắp lại|hai chiếc thuyền|gió bão đông bắc|dầu và lương thực|chim hải âu|thủy triều rút|sửa chữa cầu thang"),
    "el": (" ", "πυκνή ομίχλη ως την αυγή|ο φάρος άναψε ξανά|δύο πλοία στον ορίζοντα|ΘΥΕΛΛΑ ΑΠΟ ΒΟΡΡΑ|"
                "λάδι και τρόφιμα|γλάροι στους βράχους|άμπωτη το πρωί|επισκευή της σκάλας ᾠδή"),
    "ru": (" ", "густой туман до рассвета|маяк зажжён вновь|два парохода прошли|шторм с северо-запада|"
                "керосин доставлен|чайки на скале|отлив в полночь|починили лестницу ещё раз"),
    "uk": (" ", "густий туман об'єднався|ліхтар засвічено|два кораблі|буря з півночі|гас привезли|чайки над морем|відплив|під’їзд полагоджено"),
    "sr": (" ", "густа магла изнад луке|светионик упаљен|два брода|олуја са севера|уље стигло|галебови|осека|поправка степеница"),
    "ar": (" ", "ضباب كثيف حتى الفجر|أُشعل المصباح من جديد|سفينتان في الأفق|عاصفة من الشمال|وصل الزيت والمؤن|طيور النورس|جزر عند الظهر|إصلاح السلّم ١٢"),
    "he": (" ", "ערפל כבד עד השחר|המנורה הודלקה שוב|שתי אניות בצה\"ל|סערה מצפון|שמן ומזון צ'ק|שחפים על הסלע|שפל בחצות|תיקון המדרגות"),
    "hi": (" ", "घना कोहरा भोर तक|दीपक फिर जलाया गया|दो जहाज़ दिखे|उत्तर से आँधी|तेल और रसद पहुँची|समुद्री पक्षी|भाटा आधी रात को|सीढ़ी की मरम्मत १८६८"),
    "ta": (" ", "அடர்ந்த மூடுபனி|விளக்கு ஏற்றப்பட்டது|இரண்டு கப்பல்கள்|வடக்கு புயல்|எண்ணெய் வந்தது|கடற்பறவைகள்|வற்று நேரம்|படிக்கட்டு பழுது"),
    "th": ("", "หมอกหนาจนรุ่งเช้า|จุดตะเกียงใหม่|เรือสองลำ|พายุจากทิศเหนือ|น้ำมันมาถึง|นกนางนวล|น้ำลงเที่ยงคืน|ซ่อมบันได"),
    "km": ("", "អ័ព្ទក្រាស់|ចង្កៀងត្រូវបានបំភ្លឺ|កប៉ាល់ពីរ|ព្យុះពីជើង|ប្រេងមកដល់|បក្សីសមុទ្រ|ទឹកស្រក|ជួសជុលជណ្តើរ"),
    "zh": ("", "濃霧至黎明，|重新點燃燈塔。|兩艘船、三艘船|北方大風|煤油抵達|海鷗在岩上|午夜退潮|修理𠮷梯〇級"),
    "ja": ("", "夜明けまで濃い霧。|ランプを再びともす|船が二隻、時々見ゆ|北からの強風ガーデン|石油とコーヒー着く|カモメがﾊﾞﾀﾊﾞﾀ|深夜の干潮々|階段のペンキ塗り"),
    "ko": (" ", "새벽까지 짙은 안개|등대를 다시 밝혔다|배 두 척이 보였다|북쪽에서 강풍|석유가 도착했다|갈매기 떼|자정의 썰물|계단 수리"),
    "": (" ", "🌫️ 🌁 fog|🏮👨‍🚒 lamp|🚢⛵️🇫🇷🇩🇪🇬🇧 ships|🌬️💨 ①② gales ½ ¼|🛢️×12 supplies_list|🐦‍⬛ birds|🌊 tides ﬁne ﬂow|🔧 ℡ repairs Ⅻ ᾳ̈"),
}
STATIONS = ("Skerrow Point", "Hallan Rock", "Veyre Harbour", "Leuchtturm Süd", "Φάρος", "灯台")


def decomposed(text):
    """Each mark as a character of its own."""
    return unicodedata.normalize("NFD", text)


def hyphenated(text):
    """Soft hyphens within, as a justified page has them."""
    return "".join(char + "\u00ad" if at % 7 == 3 else char for at, char in enumerate(text))


def wide(text):
    """Full-width letters and digits."""
    return "".join(chr(ord(char) + 0xfee0) if "!" <= char <= "~" else char for char in text)


def spaced(text):
    """White space of other kinds."""
    return text.replace(" ", "\u00a0").replace(",", ",\u2003\t\r\n")


WAYS = (str, str, str, str, str.upper, str.title, decomposed, hyphenated, wide, spaced)


class Chance:
    """Draws from a seeded generator."""

    def __init__(self, seed):
        self.draw = random.Random(seed).random

    def below(self, number):
        """A whole number."""
        return int(self.draw() * number)

    def one(self, many):
        """One of them."""
        return many[self.below(len(many))]


def fields(chance):
    """Values of each kind."""
    given = {"station": chance.one(STATIONS), "year": 1868 + chance.below(84), "lit": chance.draw() < .5,
             "depth": chance.one((12.5, 0.1, 3.0, 1e21, -7.25)), "hands": [chance.one("DKMRW") for _ in range(3)],
             "remark": "x" * chance.one((3, 240, 247, 248, 249, 300))}
    return {name: value for name, value in given.items() if chance.draw() < .4}


def entry(number, chance):
    """One entry."""
    language = chance.one(tuple(PHRASES))
    between, phrases = PHRASES[language][0], PHRASES[language][1].split("|")
    said = [chance.below(len(phrases)) for _ in range(1 + chance.below(9))]
    written = [chance.one(WAYS)(phrases[place]) for place in said]
    cut = chance.below(2)
    tags = {TAGS[place] for place in said if chance.draw() < .7} | ({f"in {language}"} if chance.draw() < .6 else set())
    item = {"id": f"scripts/{number}", "title": between.join(written[:cut]), "text": between.join(written[cut:]),
            "tags": sorted(tags), "fields": fields(chance)}
    if language and chance.draw() < .8:
        item["language"] = language
    return item


def entries(count, seed=1868):
    """So many entries."""
    chance = Chance(seed)
    return [entry(number, chance) for number in range(count)]
