/* cminpack lmder + fused LM: timing | batch | check | micro */
#include "common.h"
#include "lm.h"
#include <sys/wait.h>
#include <cminpack.h>
typedef struct { const Circuit*c; const Data*d; int logres; double *buf; } Ctx;
static int fcn(void*p,int m,int n,const double*x,double*f,double*J,int ld,int flag){
  Ctx*q=(Ctx*)p; (void)ld;
  if(!q->logres){ if(flag==1)q->c->F(q->d,x,f,0); else if(flag==2)q->c->J(q->d,x,0,J); return 0; }
  /* complex-log residual: ln(Zfit/Zm) */
  double*r=q->buf; int h=m/2; q->c->F(q->d,x,r,0); if(flag==2)q->c->J(q->d,x,0,J);
  for(int i=0;i<h;i++){ double zr=q->d->zr[i],zi=q->d->zi[i],g=q->d->wt[i],vr=r[i]+zr*g,vi=r[i+h]+zi*g,s=vr*vr+vi*vi; /* v = Zfit/|Zm| */
    if(flag==1){ f[i]=0.5*log(s); f[i+h]=atan2(vi*zr-vr*zi,vr*zr+vi*zi); }
    else for(int k=0;k<n;k++){ double a=J[k*m+i],b=J[k*m+i+h]; J[k*m+i]=(a*vr+b*vi)/s; J[k*m+i+h]=(b*vr-a*vi)/s; } }
  return 0;
}
static double W[2*MAXM*(MAXP+2)];
static int lm_mp(const Circuit*c,const Data*d,double*x,int mode,double factor,int logres,int maxfev,Stat*s){
  int m=2*d->m,n=c->n,ip[MAXP]; static double rb[2*MAXM]; double *f=W,*J=W+m,diag[MAXP],qtf[MAXP],w1[MAXP],w2[MAXP],w3[MAXP],*w4=J+m*n; Ctx q={c,d,logres,rb};
  for(int j=0;j<n;j++)diag[j]=1;
  s->info=lmder(fcn,&q,m,n,x,f,J,m,1e-8,1e-8,1e-8,maxfev,diag,mode,factor,0,&s->nfev,&s->njev,ip,qtf,w1,w2,w3,w4);
  double e=0; for(int i=0;i<m;i++)e+=f[i]*f[i]; s->cost=0.5*e; return s->info;
}
static void fit_mp(const Circuit*c,const Data*d,double*x,Stat*s){lm_mp(c,d,x,2,100,0,100*(c->n+1),s);}
static void fit_lm(const Circuit*c,const Data*d,double*x,Stat*s){lm_fused(c,d,x,0,500,&s->nfev,&s->njev,&s->cost);}
static void check(const char*dir){ /* Jacobian against central differences; predicted std of ln p from J'J at the optimum */
  for(int q=0;q<3;q++){ const Circuit*c=&CIRC[q]; Data d; char p[512]; snprintf(p,512,"%s/%s/000.csv",dir,c->name); load(p,&d); int m=2*d.m; static double f[2*MAXM],g[2*MAXM],J[2*MAXM*MAXP]; double x[MAXP],worst=0; Stat s;
    for(int lg=0;lg<2;lg++){ static double rb[2*MAXM]; Ctx cx={c,&d,lg,rb}; start(c,x); fcn(&cx,m,c->n,x,f,J,m,2); worst=0; double sc=0; for(int i=0;i<m*c->n;i++)sc=fmax(sc,fabs(J[i]));
      for(int k=0;k<c->n;k++){ double y[MAXP]; memcpy(y,x,sizeof y); y[k]+=1e-5; fcn(&cx,m,c->n,y,f,J,m,1); y[k]-=2e-5; fcn(&cx,m,c->n,y,g,J,m,1); for(int i=0;i<m;i++)worst=fmax(worst,fabs((f[i]-g[i])/2e-5-J[k*m+i])/sc); }
      printf("{\"check\":\"%s\",\"log\":%d,\"jac_maxdev\":%.2g",c->name,lg,worst); if(!lg)printf("}\n"); else break; }
    start(c,x); fit_mp(c,&d,x,&s); c->FJ(&d,x,f,J); double A[MAXP][MAXP],e[MAXP],v[MAXP]; 
    for(int i=0;i<c->n;i++)for(int j=0;j<=i;j++)A[i][j]=A[j][i]=dot(J+i*m,J+j*m,m);
    printf(",\"chi2_red\":%.4f,\"sd_pct\":[",2*s.cost/(m-c->n)/1e-6); for(int i=0;i<c->n;i++){memset(e,0,sizeof e);e[i]=-1;chol_solve(c->n,A,e,v);printf("%s%.3g",i?",":"",100*1e-3*sqrt(v[i]));} printf("]}\n"); }
}
static void micro(const char*dir,const char*label){
  for(int q=0;q<3;q++){ const Circuit*c=&CIRC[q]; Data d; char p[512]; snprintf(p,512,"%s/%s/000.csv",dir,c->name); load(p,&d); static double f[2*MAXM],J[2*MAXM*MAXP]; double x[MAXP],r[2][9]; start(c,x);
    for(int mode=0;mode<2;mode++)for(int rep=0;rep<9;rep++){ int K=20000; double t=now(); for(int k=0;k<K;k++){x[0]+=1e-12;(mode?c->FJ:c->F)(&d,x,f,J);__asm__ volatile(""::"r"(f),"r"(J):"memory");} r[mode][rep]=(now()-t)/K/d.m*1e9; }
    printf("{\"micro\":\"%s\",\"circuit\":\"%s\",\"f_ns\":%.3g,\"fj_ns\":%.3g}\n",label,c->name,med(r[0],9),med(r[1],9)); }
}
static void batch(const char*dir,int q,int N,int workers){
  if(workers>1)setvbuf(stdout,NULL,_IOLBF,4096); /* whole lines: two writers share stdout */
  const Circuit*c=&CIRC[q]; for(int w=0;w<workers;w++)if(workers==1||!fork()){ Data d; char p[512];
    for(int k=w;k<N;k+=workers){double x[MAXP];Stat s;snprintf(p,512,"%s/%s/%03d.csv",dir,c->name,k);load(p,&d);start(c,x);fit_mp(c,&d,x,&s);printf("%03d.csv",k);for(int j=0;j<c->n;j++)printf(",%.9g",exp(x[j]));putchar('\n');}
    fflush(stdout); if(workers>1)_exit(0); }
  if(workers>1)while(wait(NULL)>0);
}
int main(int a,char**v){ if(a<3)return 1;
  if(!strcmp(v[1],"timing")){ const char*cd=a>4?v[4]:NULL; timing("c_cminpack",fit_mp,v[2],atoi(v[3]),cd); timing("c_fusedlm",fit_lm,v[2],atoi(v[3]),cd); }
  else if(!strcmp(v[1],"batch"))batch(v[2],v[3][0]-'A',atoi(v[4]),atoi(v[5]));
  else if(!strcmp(v[1],"micro"))micro(v[2],v[3]);
  else if(!strcmp(v[1],"check"))check(v[2]);
  return 0; }
