"""A page on this machine that shows the picture a camera would take while the camera is changed.

run.py       the whole life of it: folder, socket, browser, end
app.py       routes: what the page may ask, and what it is answered
guard.py     who may ask: one machine, one address, one token; what every answer's head says
studio.py    what each route does: the state, its scene, its picture and figures together
designs.py   designs as files, and which files they may name
lists.py     what can be chosen
refused.py   what is answered to what cannot be
state.py     a flat JSON object of plain values -> a Camera and what is looked at
folder.py    the private folder
shelf.py     scenes and uploads, and the last of them decoded
memory.py    memory goes back when nothing is to be done
work.py      one thread for pictures: the newest request of each place in the page, nothing older
sizes.py     how large pictures are, what files can be made
pictures.py  pictures, sheets and files of one state
figures.py   numbers, times, curves, and what lies under the pointer
page/        the page itself: files that a browser takes as they are
"""
