"""Words the invented names are made of."""

TOWNS = (
    "brackhaven", "mewsport", "tarnholm", "ostwick", "kelpmouth", "gullness", "sandrigg", "netherquay",
    "hollowstaithe", "wrackford", "dulsebay", "cairnhythe", "pilotsend", "lanternpool", "eddystow",
    "cobbleness", "rimeport", "shoalby", "ternwick", "anchorby", "moorlee", "saltersgate", "windlass",
    "fathomleigh",
)  # fmt: skip
ADJECTIVES = (
    "amber", "bold", "brisk", "calm", "copper", "coral", "crown", "drift", "early", "east", "fair", "finn",
    "first", "golden", "green", "grey", "high", "keen", "kind", "little", "long", "low", "lucky", "merry",
    "misty", "new", "noble", "north", "old", "open", "pearl", "quiet", "red", "silver", "south", "spring",
    "stone", "sunny", "swift", "tidal", "true", "west", "white", "wild",
)  # fmt: skip
TRADES = (
    "anchors", "antiques", "bakery", "bikes", "boats", "books", "brewery", "cafe", "candles", "ceramics",
    "cheese", "chandlery", "crafts", "dairy", "electric", "fabrics", "fish", "florist", "framing", "garage",
    "gardens", "gifts", "hardware", "jewellery", "joinery", "kayaks", "knitwear", "lamps", "leather",
    "nets", "optics", "paints", "pianos", "pies", "plumbing", "prints", "ropes", "sails", "shoes",
    "smokehouse", "tackle", "tailors", "tea", "tiles", "timber", "toys", "violins", "wines",
)  # fmt: skip
PURSUITS = (
    "archery", "astronomy", "bellringing", "birding", "bowls", "canoe", "chess", "choir", "cricket",
    "cycling", "dance", "drama", "fells", "fossils", "gliding", "history", "kites", "lighthouses", "maps",
    "meteors", "model-boats", "mosses", "orchids", "pottery", "puffins", "quilts", "radio", "railways",
    "rowing", "running", "sailing", "seashells", "shipwrecks", "swimming", "tides", "walking", "weather",
    "whales",
)  # fmt: skip
PEOPLE = (
    "ada", "arlo", "bea", "bram", "cato", "cora", "dara", "edda", "eli", "fern", "finlay", "greta", "hal",
    "ida", "ines", "ivo", "jory", "juno", "kit", "lena", "lorn", "mab", "milo", "nell", "noor", "odo",
    "orla", "otis", "pia", "quin", "rhea", "rolf", "runa", "sable", "seth", "signe", "tamsin", "theo",
    "una", "vera", "wren", "yara", "zeb",
)  # fmt: skip
DEPARTMENTS = (
    "www", "library", "physics", "geology", "marine", "history", "law", "maths", "music", "nursing",
    "alumni", "press", "sport", "archive", "biology", "cs", "languages", "estates", "open-days", "research",
)  # fmt: skip
OFFICES = (
    "www", "planning", "harbour", "roads", "parks", "elections", "archives", "waste", "housing", "events",
    "registry", "licensing", "tourism", "coastguard", "fisheries", "schools", "beaches", "records", "flood",
    "jobs",
)  # fmt: skip
PAPERS = ("gazette", "herald", "courier", "echo", "observer", "mercury", "tidings", "post")
MARKET_WORDS = (
    "best", "cheap", "deal", "fast", "loan", "bonus", "rate", "quick", "offer", "top", "voucher", "pill",
    "watch", "replica", "casino", "credit", "save", "mega", "prime", "super", "rich", "slim", "boost", "plus",
)  # fmt: skip
ISLES = ("north", "inner", "outer", "skerry")
BOATS = (
    "petrel", "kittiwake", "fulmar", "gannet", "avocet", "dunlin", "curlew", "plover", "sanderling", "knot",
)  # fmt: skip
