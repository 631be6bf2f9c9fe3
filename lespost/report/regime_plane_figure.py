def regime_plane_figure(r):
    import matplotlib.pyplot as plt
    return plt.subplots(figsize=(3.5,3))[0]
