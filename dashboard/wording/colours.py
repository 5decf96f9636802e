"""Paper, inks and the four signal colours, light and dark."""

# Text colours keep 4.5:1 and marks 3:1 on both papers (WCAG 2.2, 1.4.3 and 1.4.11); tests compute it.
# Blue, vermillion and bluish green are those of Okabe and Ito 2008, darkened or lightened where text needs
# it.
PALETTES: dict[str, dict[str, str]] = {
    "light": {
        "paper": "#fbf9f4",
        "wash": "#f3f0e7",
        "ink": "#1e2226",
        "quiet": "#57534a",
        "rule": "#cdc6b6",
        "forecast": "#0067a3",
        "target": "#00704f",
        "breach": "#a84300",
        "breach_mark": "#d55e00",
    },
    "dark": {
        "paper": "#15191c",
        "wash": "#1f2528",
        "ink": "#ece7db",
        "quiet": "#b3ac9e",
        "rule": "#454e53",
        "forecast": "#56b4e9",
        "target": "#3cc79a",
        "breach": "#ff9152",
        "breach_mark": "#e86a10",
    },
}


def colour_variables() -> str:
    """The palette as a style sheet; the browser picks light or dark from the page's own colour scheme."""
    light, dark = PALETTES["light"], PALETTES["dark"]
    lines = (f"--fb-{name.replace('_', '-')}: light-dark({light[name]}, {dark[name]});" for name in light)
    return ".stApp {" + " ".join(lines) + "}"
